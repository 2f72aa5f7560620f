"""Cost of one scan: 100 tags, 30 interlocks that vote 2oo3 over 90 of them, every sample new.

The floor reads the value of each sample and compares it with a limit.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field
from time import perf_counter_ns

from bench.figures import Figure, Scale, Target, median
from fakes.rigs import MS, S, program_of, sensor, two_pump_rig

from rigd.logic import scan
from rigd.logic.program import Program
from rigd.model.devices import DeviceIdentity, DeviceStatus, LinkState
from rigd.model.intake import Intake
from rigd.model.orders import Request, Stop, Verb
from rigd.model.protection import Condition, ConditionKind, Interlock
from rigd.model.samples import Sample

LIMIT_bar = 8.0
SHARE = 0.3
"""Interlocks per tag."""


@dataclass
class ScanTimes:
    """Wall times per scan [us]."""

    whole: list[float] = field(default_factory=list)
    protect: list[float] = field(default_factory=list)
    conduct: list[float] = field(default_factory=list)
    floor: list[float] = field(default_factory=list)


def scan_figures(scale: Scale) -> Iterator[Figure]:
    """The figure of design: 100 tags and 30 voted interlocks."""
    times = measure_scans(100, scale.pick(30, 2000, 10_000))
    whole_us = median(times.whole)
    yield Figure(
        "scan",
        "scan of 100 new samples, 30 voted interlocks",
        "ms",
        whole_us / 1e3,
        median(times.floor) / 1e3,
        "read and compare 100 attributes",
        Target(value_max=0.2),
        f"protect {median(times.protect):.0f} us, conduct (at rest) {median(times.conduct):.0f} us; median of "
        f"{len(times.whole)}",
        detail={"quiet_us": quiet_us(scale.pick(30, 2000, 10_000))},
    )


def measure_scans(tags: int, scans: int) -> ScanTimes:
    """Scans of ``tags`` new samples, none near a limit, floor and scan in turn."""
    program = program_with(tags)
    state = at_rest(program)
    names = [f"T{i}" for i in range(tags)]
    times = ScanTimes()
    for number in range(1, scans + 1):
        now_ns = number * MS + MS
        value = 1.0 + number % 7
        samples = tuple(Sample(name, value, now_ns) for name in names)
        intake = Intake(samples=samples)
        t0 = perf_counter_ns()
        first = scan.protect(program, state, intake, now_ns)
        t1 = perf_counter_ns()
        second = scan.conduct(program, first.state, intake, now_ns)
        t2 = perf_counter_ns()
        state = second.state
        assert not first.events, "nothing trips here"
        for kept, ns in ((times.whole, t2 - t0), (times.protect, t1 - t0), (times.conduct, t2 - t1)):
            kept.append(ns / 1e3)
        times.floor.append(floor_ns(samples) / 1e3)
    return times


def quiet_us(scans: int) -> float:
    """Median time of a scan in which nothing is new [us]."""
    program = program_with(100)
    state = at_rest(program)
    took = []
    for number in range(1, scans + 1):
        t0 = perf_counter_ns()
        state = scan.scan(program, state, Intake(), (number + 1) * MS).state
        took.append((perf_counter_ns() - t0) / 1e3)
    return median(took)


def floor_ns(samples: tuple[Sample, ...]) -> int:
    """The floor: read each value and compare it."""
    t0 = perf_counter_ns()
    high = 0
    for sample in samples:
        if sample.value > LIMIT_bar:
            high += 1
    took_ns = perf_counter_ns() - t0
    assert not high
    return took_ns


def program_with(tags: int) -> Program:
    """A two-pump rig with this many more tags and ``SHARE`` as many voted interlocks; the recipe has no points."""
    sensors = tuple(sensor(f"T{i}", "pressure", "bar", 0.0, 25.0, 100 * MS, 3600 * S) for i in range(tags))
    return program_of(two_pump_rig(interlocks=_locks(round(SHARE * tags)), alarms=(), sensors=sensors))


def at_rest(program: Program) -> scan.CoreState:
    """Everything seen once, online and reset: nothing is tripped, nothing moves."""
    who = DeviceIdentity("bench", "plain", "1")
    links = tuple(DeviceStatus(device.id, LinkState.ONLINE, 0, identity=who) for device in program.rig.devices)
    first = tuple(Sample(tag.id, 0.0, 0) for tag in program.rig.tags if tag.device)
    state = scan.scan(program, scan.initial(program, 0), Intake(samples=first, links=links), 0).state
    reset = Intake(requests=(Request("1", Verb.RESET, "bench", 0, "*"),))
    state = scan.scan(program, state, reset, MS).state
    assert state.protect.verdict.permit
    return state


def _locks(count: int) -> tuple[Interlock, ...]:
    def causes(lock: int) -> tuple[Condition, ...]:
        return tuple(Condition(ConditionKind.HIGH, f"T{3 * lock + k}", LIMIT_bar, 0.2) for k in range(3))

    return tuple(Interlock(f"I{i}", f"I{i}", causes(i), Stop.CUT, votes=2, on_delay_ns=200 * MS) for i in range(count))
