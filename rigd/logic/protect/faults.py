"""What is wrong with the daemon, its devices' links and power: causes that no tag carries.

A fault stands from its report until ``HOLD_NS`` after the last one: the shell repeats a fault as long as it lasts. A
request to stop is a fault of one instant. A device that answers as another one stands until the right one is back.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

from rigd.logic.protect.conditions import Channel, Judge
from rigd.logic.protect.signals import Signals, grace_ns, is_online
from rigd.logic.protect.timers import NEVER_NS
from rigd.model.devices import DeviceIdentity, DeviceStatus
from rigd.model.protection import ConditionKind

if TYPE_CHECKING:
    from rigd.logic.program import Program

HOLD_NS = 1_000_000_000

Key = tuple[ConditionKind, str]


@dataclass(frozen=True, slots=True)
class Fault:
    """A standing fault: when it lapses unless renewed, and the words of who reported it."""

    until_ns: int
    detail: str


@dataclass(frozen=True, slots=True)
class Faults:
    """Standing faults by condition kind and name; ``due_ns`` is when the first lapses."""

    standing: Mapping[Key, Fault] = field(default_factory=dict)
    due_ns: int = NEVER_NS
    links_due_ns: int = NEVER_NS

    def detail(self, kind: ConditionKind, name: str) -> str:
        """The words of the reporter, "" when it does not stand."""
        fault = self.standing.get((kind, name))
        return "" if fault is None else fault.detail


def initial(program: Program, now_ns: int) -> Faults:
    """No fault; links have their time of grace."""
    return Faults(links_due_ns=now_ns + grace_ns(program))


def report(faults: Faults, names: Iterable[tuple[str, str]], until_ns: int) -> Faults:
    """Faults (name, detail) of the daemon itself, standing until ``until_ns`` unless renewed."""
    found: dict[Key, Fault] = {(ConditionKind.FAULT, name): Fault(until_ns, detail) for name, detail in names}
    return _with(faults, found) if found else faults


def of_options(program: Program, started_ns: int, now_ns: int) -> tuple[tuple[str, str], ...]:
    """What the run's own options make wrong: a permit that has ended, proof tests that are overdue."""
    options = program.options
    found: tuple[tuple[str, str], ...] = ()
    if options.permit_ns and now_ns - started_ns >= options.permit_ns:
        found = (("permit-end", "the permit for unattended work has ended"),)
    if options.overdue:
        found = (*found, ("PROOF-OVERDUE", f"no proof test in date: {', '.join(options.overdue)}"))
    return found


def power(program: Program, faults: Faults, before: Signals, statuses: Iterable[DeviceStatus], now_ns: int) -> Faults:
    """Faults of power and identity from link changes. The first answer of a device is how we find it, not a fault."""
    found: dict[Key, Fault] = {}
    known = dict(before.identities)
    for status in statuses:
        first = known.get(status.device)
        key = (ConditionKind.POWER_CYCLED, status.device)
        wrong = _wrong(program, status, first)
        if wrong:
            found[key] = Fault(NEVER_NS, wrong)
        elif first is not None and status.power_cycled:
            found[key] = Fault(now_ns + HOLD_NS, "it restarted and has lost what it was told")
        elif status.identity is not None and key in faults.standing:
            found[key] = Fault(now_ns, "the right device is back")
        if status.identity is not None:
            known.setdefault(status.device, status.identity)
    return _with(faults, found) if found else faults


def _wrong(program: Program, status: DeviceStatus, first: DeviceIdentity | None) -> str:
    """Why this is not the device that it should be, or ""."""
    spec, now = program.devices.get(status.device), status.identity
    if now is None:
        return ""
    if spec is not None and spec.serial_no and now.serial_no != spec.serial_no:
        return f"serial number {now.serial_no} answers, {spec.serial_no} is declared"
    if first is not None and (now.maker, now.model, now.serial_no) != (first.maker, first.model, first.serial_no):
        return f"{now.model} {now.serial_no} answers where {first.model} {first.serial_no} was"
    return ""


def lapse(faults: Faults, now_ns: int) -> tuple[Faults, tuple[Key, ...]]:
    """Drop what has lapsed; returns the names that did."""
    if now_ns < faults.due_ns:
        return faults, ()
    gone = tuple(key for key, fault in faults.standing.items() if fault.until_ns <= now_ns)
    kept = {key: fault for key, fault in faults.standing.items() if key not in gone}
    return Faults(kept, _due_ns(kept), faults.links_due_ns), gone


def judge(program: Program, faults: Faults, judge: Judge, now_ns: int) -> None:
    """Set the channels of all faults that stand; lapsed ones are cleared by ``clear``."""
    for key in faults.standing:
        for watch in program.untagged.get(key, ()):
            judge.put(watch, Channel.ACTIVE, now_ns)


def clear(program: Program, keys: Iterable[Key], judge: Judge, now_ns: int) -> None:
    """Clear the channels of lapsed faults."""
    for key in keys:
        for watch in program.untagged.get(key, ()):
            judge.put(watch, Channel.CLEAR, now_ns)


def links(program: Program, faults: Faults, signals: Signals, judge: Judge, now_ns: int) -> Faults:
    """Judge all link conditions; called when a link changed or the time of grace has run out."""
    late = now_ns >= faults.links_due_ns
    for (kind, device), watches in program.untagged.items():
        if kind is not ConditionKind.LINK:
            continue
        status = signals.devices.get(device)
        if is_online(status):
            channel = Channel.CLEAR
        elif device in signals.identities or late:
            channel = Channel.ACTIVE
        else:
            channel = Channel.UNKNOWN
        for watch in watches:
            judge.put(watch, channel, now_ns)
    return Faults(faults.standing, faults.due_ns, NEVER_NS) if late else faults


def _with(faults: Faults, found: Mapping[Key, Fault]) -> Faults:
    standing = {**faults.standing, **found}
    return Faults(standing, _due_ns(standing), faults.links_due_ns)


def _due_ns(standing: Mapping[Key, Fault]) -> int:
    return min((fault.until_ns for fault in standing.values()), default=NEVER_NS)
