"""What the rules of a rig leave open: parts without a trip, actuators without a rest, causes that nobody sees.

``USUAL`` is the usual set of causes of a flow rig (own proposal; tests/reference/cause_effect.csv holds it with what
each is answered by). Which sensor stands for which cause is found from what it measures and where; a state (a leak
tray, a float, the contact of a stop button) is known by the words of its tag.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass

from rigd.config.pressure_side import pressure_sides, side_of
from rigd.model.orders import Stop
from rigd.model.protection import Condition, ConditionKind, Interlock, OnBad
from rigd.model.rig import RigDefinition, Tag, TagKind, VesselRole


@dataclass(frozen=True, slots=True)
class Gap:
    """Something that is missing: ``code`` is rated-part-without-trip, actuator-without-rest or cause-unseen."""

    code: str
    what: str
    remedy: str


@dataclass(frozen=True, slots=True)
class Usual:
    """A usual cause: its row of the table, what happens, how a rig sees it (ids of the rules), and what to add."""

    id: str
    cause: str
    seen_by: Callable[[RigDefinition], tuple[str, ...]]
    add: str


def gaps(rig: RigDefinition) -> tuple[Gap, ...]:
    """All of them, the gravest first."""
    return (*_parts(rig), *_actuators(rig), *_unseen(rig))


def coverage(rig: RigDefinition) -> tuple[tuple[Usual, tuple[str, ...]], ...]:
    """Each usual cause with the rules that see it."""
    return tuple((one, one.seen_by(rig)) for one in USUAL)


def _parts(rig: RigDefinition) -> Iterator[Gap]:
    sides = pressure_sides(rig)
    held = [side_of(sides, tag.at) for lock, cause, tag in _watched(rig) if _is_over_pressure(lock, cause, tag)]
    for side in sides:
        if side not in held:
            pumps = ", ".join(pump.id for pump in rig.pumps if pump.id in side.parts)
            what = f"nothing trips on the pressure behind {pumps}; {side.weakest} there holds {side.rating_bar:g} bar"
            yield Gap("rated-part-without-trip", what, "a pressure sensor with an interlock that cuts")


def _actuators(rig: RigDefinition) -> Iterator[Gap]:
    vessels = {vessel.id: vessel for vessel in rig.vessels}
    into = {(line.end.part, line.end.port): line.start.part for line in rig.lines}
    out = {(line.start.part, line.start.port): line.end.part for line in rig.lines}
    reagents = {liquid.id for liquid in rig.liquids if liquid.role != "solvent"}
    for valve in rig.valves:
        if not valve.device:
            yield Gap(
                "actuator-without-rest", f"{valve.id} is turned by hand: a stop leaves it as it is", "a driven valve"
            )
            continue
        source, drain = vessels.get(into.get((valve.id, valve.rest), "")), out.get((valve.id, valve.rest), "")
        feeds = any((valve.id, position) in into for position in valve.positions)
        if feeds and (source is None or source.liquid in reagents):
            drawn = source.liquid if source else "nothing"
            what = f"{valve.id} rests at {valve.rest!r}, where it draws {drawn}"
            yield Gap("actuator-without-rest", what, "solvent at its rest position")
        if not feeds and not drain:
            yield Gap(
                "actuator-without-rest", f"{valve.id} rests shut: what expands has no way out", "an open rest position"
            )


def _unseen(rig: RigDefinition) -> Iterator[Gap]:
    for one, rules in coverage(rig):
        if not rules:
            yield Gap("cause-unseen", f"no rule sees {one.cause} ({one.id})", one.add)


def _watched(rig: RigDefinition) -> Iterator[tuple[Interlock, Condition, Tag]]:
    tags = {tag.id: tag for tag in rig.tags}
    for lock in rig.interlocks:
        for cause in lock.causes:
            if cause.tag in tags:
                yield lock, cause, tags[cause.tag]


def _is_over_pressure(lock: Interlock, cause: Condition, tag: Tag) -> bool:
    return tag.measures == "pressure" and cause.kind is ConditionKind.HIGH and lock.stop is Stop.CUT


Test = Callable[[Interlock, Condition, Tag], bool]


def _stops(test: Test) -> Callable[[RigDefinition], tuple[str, ...]]:
    """Interlocks one of whose causes passes the test."""
    return lambda rig: _ids(lock.id for lock, cause, tag in _watched(rig) if test(lock, cause, tag))


def _named(*beginnings: str) -> Callable[[RigDefinition], tuple[str, ...]]:
    """Rules, stops or alarms, whose ids begin so."""

    def found(rig: RigDefinition) -> tuple[str, ...]:
        names = (*(lock.id for lock in rig.interlocks), *(alarm.id for alarm in rig.alarms))
        return _ids(name for name in names if name.startswith(beginnings))

    return found


def _either(*ways: Callable[[RigDefinition], tuple[str, ...]]) -> Callable[[RigDefinition], tuple[str, ...]]:
    return lambda rig: _ids(name for way in ways for name in way(rig))


def _ids(names: Iterable[str]) -> tuple[str, ...]:
    return tuple(dict.fromkeys(names))


def _on(measures: str, *kinds: ConditionKind, stops: tuple[Stop, ...] = (Stop.CUT, Stop.QUENCH, Stop.HOLD)) -> Test:
    return lambda lock, cause, tag: tag.measures == measures and cause.kind in kinds and lock.stop in stops


def _blind(measures: str) -> Test:
    """A rule that trips when its only, or every, channel of this quantity cannot be believed."""
    quality = (ConditionKind.BAD, ConditionKind.STALE, ConditionKind.FROZEN, ConditionKind.DIAGNOSTIC)
    return lambda lock, cause, tag: tag.measures == measures and (cause.kind in quality or lock.on_bad is OnBad.TRIP)


def _state(*words: str) -> Test:
    """A state whose tag speaks of one of these words."""

    def test(lock: Interlock, cause: Condition, tag: Tag) -> bool:
        spoken = " ".join((tag.id, tag.title, *tag.labels)).lower()
        is_state = tag.kind is TagKind.DISCRETE and tag.measures == "state"
        return is_state and any(word in spoken for word in words)

    return test


def _alarm_on(measures: str, *kinds: ConditionKind) -> Callable[[RigDefinition], tuple[str, ...]]:
    def found(rig: RigDefinition) -> tuple[str, ...]:
        tags = {tag.id: tag for tag in rig.tags}
        watching = [(alarm, tags.get(alarm.condition.tag)) for alarm in rig.alarms]
        return _ids(
            alarm.id for alarm, tag in watching if tag and tag.measures == measures and alarm.condition.kind in kinds
        )

    return found


def _level(rig: RigDefinition) -> tuple[str, ...]:
    """Rules on the counted or measured volume of a vessel that takes liquid."""
    takers = {vessel.id for vessel in rig.vessels if vessel.role is not VesselRole.SUPPLY}
    tags = {tag.id for tag in rig.tags if tag.measures == "volume" and tag.at in takers}
    stops = [lock.id for lock, cause, tag in _watched(rig) if tag.id in tags]
    return _ids((*stops, *(alarm.id for alarm in rig.alarms if alarm.condition.tag in tags)))


def _always(words: str) -> Callable[[RigDefinition], tuple[str, ...]]:
    """Seen by a part of the daemon that is no rule of the rig."""
    return lambda rig: (words,)


_HIGH, _LOW, _RATE = ConditionKind.HIGH, ConditionKind.LOW, ConditionKind.RATE
_AWAY = (ConditionKind.DEVIATION, ConditionKind.DISCREPANCY)
_P, _T, _F = "pressure", "temperature", "flow"
_MEASURED_FLOW: Test = lambda lock, cause, tag: tag.kind is TagKind.MEASURED and _on(_F, _LOW, *_AWAY)(lock, cause, tag)  # noqa: E731

USUAL = (
    Usual("C01", "pressure above its limit", _stops(_on(_P, _HIGH, stops=(Stop.CUT,))), "an interlock on a pressure"),
    Usual("C02", "pressure rising as in a blocked path", _stops(_on(_P, _RATE)),
          "an interlock with rate_above; the limit itself stands behind it"),
    Usual("C03", "pressure near its limit", _either(_alarm_on(_P, _HIGH), _named("SOON-")), "an alarm below the limit"),
    Usual("C04", "pressure lost while pumping", _either(_stops(_on(_P, _LOW)), _named("OPEN-")),
          "a pressure sensor before the column, or an interlock with below"),
    Usual("C05", "liquid on the floor", _stops(_state("leak", "wet", "tray")), "a leak tray sensor with an interlock"),
    Usual("C06", "bed too hot", _stops(_on(_T, _HIGH)), "a temperature in the bed with an interlock"),
    Usual("C07", "bed warming too fast", _either(_stops(_on(_T, _RATE)), _named("HEAT-")),
          "a temperature in the bed; or an interlock with rate_above"),
    Usual("C08", "bed at its absolute limit", _stops(_on(_T, _HIGH, stops=(Stop.CUT,))),
          "a second, higher limit that cuts (not where a cut would leave a hot bed without flow)"),
    Usual("C09", "bath or circulation failed",
          _either(_stops(_on(_T, *_AWAY)), _named("MISMATCH-CH", "LINK-chiller", "LINK-CH")),
          "an interlock on the jacket against the set-point"),
    Usual("C10", "pressure not to be believed", _stops(_blind(_P)), 'on_bad = "trip" on the pressure interlock'),
    Usual("C11", "bed temperature not to be believed", _stops(_blind(_T)), 'on_bad = "trip" on its interlock'),
    Usual("C12", "less flow than ordered", _either(_stops(_MEASURED_FLOW), _named("SHORT-")), "a flow sensor"),
    Usual("C13", "pump stalled or not heard", _named("STALL-", "LINK-"), "a pump whose state can be read"),
    Usual("C14", "valve not where it was told to be", _named("MISMATCH-"), "a valve that reports its position"),
    Usual("C15", "flask at its brim", _stops(_state("flask", "brim", "high-high", "float")), "a float in the flask"),
    Usual("C16", "flask full by count or weight", _level, "an alarm or interlock on the flask's volume"),
    Usual("C17", "not enough solvent for the flush", _always("the plan and the sequence"), ""),
    Usual("C18", "stop button pressed", _stops(_state("button", "pressed", "emergency", "released")),
          "a contact of the hard-wired stop button, read as a state"),
    Usual("C19", "scan late", _named("FAULT-SCAN"), ""),
    Usual("C20", "computer was suspended", _named("FAULT-SUSPEND"), ""),
    Usual("C21", "record not written", _named("FAULT-JOURNAL"), ""),
    Usual("C22", "recipe's program failed", _named("FAULT-CONDUCT"), ""),
    Usual("C23", "alarm that nobody answers", _always("repeated; it does not stop the rig"), ""),
    Usual("C24", "a person asks for a stop", _named("STOP-REQUEST", "CUT-REQUEST"), ""),
    Usual("C25", "device restarted or exchanged", _named("POWER-"), ""),
    Usual("C26", "papers, proof tests, bypasses", _always("asked for before the start"), ""),
)  # fmt: skip
"""The usual causes of a flow rig, in the order of the table."""
