"""Judges one faulted night by the true plant: ratings, time to stop, class of stop, first-out, restart."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import dataclass

from rigd.logic.program import Program
from rigd.model.events import Event, EventKind
from rigd.model.protection import ConditionKind, Interlock
from rigd.model.rig import RigDefinition, Tag
from rigd.ports.plant import FaultSpec, Plant
from rigd.prove.expected import NONE, STRENGTH, Expected, expected
from rigd.prove.witness import Witness
from rigd.runtime.dry import DryResult

_OWN_UNIT = ("LINK-", "STALL-", "MISMATCH-", "POWER-", "EMPTY-")

At = tuple[str, int, int]
"""Phase, onset [ns] and seed."""
HELD, TOLD, UNSEEN, MISSED = "held", "told", "not seen", "missed"
VERDICTS = (HELD, TOLD, UNSEEN, MISSED)
"""From good to bad. *Told*: an alarm that a healthy night does not have came, and nothing stopped."""
_NEWS = frozenset({"new", "again"})


@dataclass(frozen=True, slots=True)
class Night:
    """One faulted night. ``why`` says what was missed ("" unless missed), ``alarms`` which alarms the fault brought.

    ``severity`` and ``harm`` say what the true plant suffered in a night in which nothing stopped a fault that asks for
    a stop ("" in all others).
    """

    kind: str
    target: str
    magnitude: float
    phase: str
    seed: int
    verdict: str
    why: str
    stop: str
    first_out: str
    first_s: float
    stopped_s: float
    peak_share: float
    peak_part: str
    alarms: tuple[str, ...]
    add: str = ""
    severity: str = ""
    harm: str = ""

    @classmethod
    def broken(cls, fault: FaultSpec, phase: str, words: str) -> Night:
        """A night whose rehearsal itself failed."""
        why = f"the rehearsal failed: {words.strip().splitlines()[-1]}"
        nan = float("nan")
        return cls(
            fault.kind, fault.target, fault.magnitude, phase, 0, MISSED, why, "", "", nan, nan, nan, "", ()
        )  # fmt: skip


def night_of(
    witness: Witness, result: DryResult, fault: FaultSpec, hazards: tuple[str, ...], at: At, usual: frozenset[str]
) -> Night:
    """Judge what a faulted rehearsal came to. ``usual``: the alarms that come without a fault too."""
    program, plant = witness.program, witness.plant
    phase, onset_ns, seed = at
    after = [event for event in result.events if event.t_ns >= onset_ns]
    trips = [event for event in after if event.kind is EventKind.TRIP]
    stops = [event for event in after if event.kind is EventKind.STOP and event.subject != NONE]
    stop = max((event.subject for event in stops), key=STRENGTH.index, default=_held(after))
    answer = expected(hazards)
    part, share = _peak(program.rig, plant)
    moving = _moving(program.rig, plant)
    why = [
        *_over_rating(part, share),
        *_stop_class(_decided(trips, stop), stop, answer, asked=_passed(program, plant, trips)),
        *_first_out(program, trips, fault, answer),
        *_still_moving(stop, moving, answer),
        *_restarted(after, trips),
    ]
    alarms = _news(after, usual)
    verdict = MISSED if why else HELD
    if not why and stop == NONE and NONE not in answer.stops:
        verdict = TOLD if alarms else UNSEEN
    severity, harm = witness.findings(part, share) if verdict in (TOLD, UNSEEN) else ("", "")
    return Night(
        kind=fault.kind, target=fault.target, magnitude=fault.magnitude, phase=phase, seed=seed, verdict=verdict,
        why="; ".join(why), stop=stop, first_out=trips[0].subject if trips else "",
        first_s=(trips[0].t_ns - onset_ns) / 1e9 if trips else float("nan"),
        stopped_s=_stop_time(after, onset_ns), peak_share=share, peak_part=part, alarms=alarms,
        add=answer.add if verdict == UNSEEN else "", severity=severity, harm=harm,
    )  # fmt: skip


def announced(events: Iterable[Event]) -> Iterator[str]:
    """The alarms that sounded, in their order."""
    for event in events:
        if event.kind is EventKind.ALARM and event.fields.get("announce") in _NEWS:
            yield event.subject


def _news(events: list[Event], usual: frozenset[str]) -> tuple[str, ...]:
    return tuple(name for name in dict.fromkeys(announced(events)) if name not in usual)


def _held(events: list[Event]) -> str:
    held = any(event.kind is EventKind.RUN_STATE and event.subject == "HELD" for event in events)
    return "hold" if held else NONE


def _peak(rig: RigDefinition, plant: Plant) -> tuple[str, float]:
    """The part that came nearest to its rating, and how near (1 = at it), in the whole night."""
    truth = plant.truth()
    ratings = {pump.id: pump.rating_bar for pump in rig.pumps}
    ratings |= {column.id: column.rating_bar for column in rig.columns}
    ratings |= {cell.id: cell.rating_bar for cell in rig.cells}
    ratings |= {tee.id: tee.rating_bar for tee in rig.tees}
    ratings |= {valve.id: valve.rating_bar for valve in rig.valves}
    ratings |= {regulator.id: regulator.rating_bar for regulator in rig.regulators}
    shares = {part: truth.get(f"peak-pressure:{part}", 0.0) / rating for part, rating in ratings.items() if rating > 0}
    part = max(shares, key=shares.__getitem__, default="")
    return part, shares.get(part, 0.0)


def _moving(rig: RigDefinition, plant: Plant) -> list[str]:
    truth = plant.truth()
    return [pump.id for pump in rig.pumps if truth.get(f"delivering:{pump.id}", 0.0) != 0.0]


def _over_rating(part: str, share: float) -> list[str]:
    return [f"{part} came to {100 * share:.0f} % of its rating"] if share > 1.0 else []


def _decided(trips: list[Event], stop: str) -> str:
    """What the first-out asked for: a quench that cannot be carried out ends as a cut, and that is no over-reaction."""
    return str(trips[0].fields.get("stop", stop)) if trips else stop


def _passed(program: Program, plant: Plant, trips: list[Event]) -> bool:
    """Did the true pressure pass the limit of the first-out? Then its stop is what the limit asks for.

    A bubble that enters a shut path, or a bed that warms in one, asks for little by itself and raises the pressure.
    """
    lock = next((one for one in program.rig.interlocks if trips and one.id == trips[0].subject), None)
    if lock is None:
        return False
    places = {tag.id: tag.at for tag in program.rig.tags if tag.measures == "pressure"}
    truth = plant.truth()
    return any(
        cause.kind is ConditionKind.HIGH
        and cause.tag in places
        and truth.get(f"peak-pressure:{places[cause.tag]}", 0.0) >= cause.limit
        for cause in lock.causes
    )


def _stop_class(decided: str, stop: str, answer: Expected, *, asked: bool = False) -> list[str]:
    """``asked``: the true plant passed the limit of the first-out, so that its stop is no over-reaction."""
    if stop == NONE:
        return []
    wanted = sorted(answer.stops, key=STRENGTH.index)
    words = " or ".join(wanted)
    if STRENGTH.index(decided) > STRENGTH.index(wanted[-1]) and not asked:
        return [f"{decided} is more than the fault asks for ({words})"]
    if STRENGTH.index(stop) < STRENGTH.index(wanted[0]):
        return [f"{stop} is less than the fault asks for ({words})"]
    return []


def _first_out(program: Program, trips: list[Event], fault: FaultSpec, answer: Expected) -> list[str]:
    """Trips of one unit must name the faulty one; others must watch a measure that the fault moves."""
    if not trips:
        return []
    name = trips[0].subject
    if name.startswith(_OWN_UNIT):
        owner = name.split("-", 1)[1]
        mine = {fault.target, *(d.id for d in program.rig.devices if d.unit == fault.target)}
        mine |= {d.unit for d in program.rig.devices if d.id == fault.target}
        return [] if owner in mine or _behind(program, owner, fault) else [f"first-out {name} points at the wrong unit"]
    interlock = next((one for one in program.rig.interlocks if one.id == name), None)
    if interlock is None or interlock.built_in or _watches(program, interlock, fault, answer):
        return []
    return [f"first-out {name} watches nothing that this fault moves"]


def _behind(program: Program, owner: str, fault: FaultSpec) -> bool:
    """A pump that stalls against a shut way, or runs dry on an empty bottle, is named for what it met."""
    return owner in {pump.id for pump in program.rig.pumps} and fault.target not in {p.id for p in program.rig.pumps}


def _watches(program: Program, interlock: Interlock, fault: FaultSpec, answer: Expected) -> bool:
    measures = {tag.id: _measure(program.rig, tag) for tag in program.rig.tags}
    tags = {tag for cause in interlock.causes for tag in (cause.tag, getattr(cause, "other", "")) if tag}
    return fault.target in tags or bool({measures.get(tag, "") for tag in tags} & answer.measures)


def _measure(rig: RigDefinition, tag: Tag) -> str:
    """A switch tells of a vessel's level or, anywhere else, of liquid where none should be; a unit tells its state."""
    if tag.measures != "state" or tag.at in _units(rig):
        return tag.measures
    return "level" if tag.at in {vessel.id for vessel in rig.vessels} else "leak"


def _units(rig: RigDefinition) -> frozenset[str]:
    return frozenset(device.unit for device in rig.devices if device.unit)


def _still_moving(stop: str, moving: list[str], answer: Expected) -> list[str]:
    rest = stop == "cut" or (stop == "hold" and answer.still)
    return [f"{', '.join(moving)} still delivers after the {stop}"] if rest and moving else []


def _restarted(events: list[Event], trips: list[Event]) -> list[str]:
    """A start that is asked for afterwards must be refused until somebody resets."""
    taken = [
        event
        for event in events
        if event.kind is EventKind.REQUEST
        and event.subject == "start"
        and str(event.fields.get("request_id", "")).startswith("afterwards")
        and event.fields.get("result") == "accepted"
    ]
    return ["a start was accepted before any reset"] if trips and taken else []


def _stop_time(events: list[Event], onset_ns: int) -> float:
    """From the fault to pumps confirmed at rest [s]; NaN when it did not come to that."""
    ended = [e.t_ns for e in events if e.kind is EventKind.RUN_STATE and e.subject in ("ABORTED", "STOPPED")]
    return (ended[0] - onset_ns) / 1e9 if ended else float("nan")
