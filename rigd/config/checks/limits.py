"""Do the rules protect what they should: limits against ratings and spans, votes, bad signals, unprotected parts."""

from __future__ import annotations

from rigd.config.checks.context import RigContext
from rigd.config.findings import listed
from rigd.config.lines import Path
from rigd.config.pressure_side import PressureSide, side_of
from rigd.config.rule_tables import AlarmTable, InterlockTable
from rigd.model.orders import Stop
from rigd.model.protection import Armed, Condition, ConditionKind, Interlock, OnBad
from rigd.model.rig import Tag, TagKind
from rigd.model.units import parse_quantity

PSI_PER_BAR = 1 / parse_quantity("1 psi", "pressure")
_PSI_SLACK = 0.06
"""A limit this near (relative) to 14.5 times a rating, or a 14.5th of it, was most likely meant in psi."""

_KEYS = {
    ConditionKind.HIGH: "above",
    ConditionKind.LOW: "below",
    ConditionKind.RATE: "rate_above",
    ConditionKind.DEVIATION: "by",
    ConditionKind.DISCREPANCY: "by",
    ConditionKind.MISMATCH: "mismatch_by",
    ConditionKind.EQUALS: "equals",
}
_QUALITY = "quality"
"""The key of every other condition that a rig file can state."""


def check_limits(context: RigContext) -> None:
    """Everything about interlocks and alarms that the structure cannot tell."""
    for table in context.file.interlocks:
        _votes(context, table)
    tags = {tag.id: tag for tag in context.rig.tags}
    for lock in context.rig.interlocks:
        for index, cause in enumerate(lock.causes if not lock.built_in else ()):
            place = context.at("interlocks", lock.id, "trip_when", index, _KEYS.get(cause.kind, _QUALITY))
            _limit(context, cause, tags.get(cause.tag), place)
        if not lock.built_in:
            _pressure_stop(context, lock, tags)
    for told in context.file.alarms:
        _urgency(context, told)
    for alarm in context.rig.alarms:
        place = context.at("alarms", alarm.id, "when", _KEYS.get(alarm.condition.kind, _QUALITY))
        if place != ("alarms",):
            _limit(context, alarm.condition, tags.get(alarm.condition.tag), place)
    _unprotected(context, tags)


def _votes(context: RigContext, table: InterlockTable) -> None:
    causes = len(table.trip_when)
    place = (*table.key_path, "vote")
    if table.vote is not None:
        needed, _, of = table.vote.partition("oo")
        allowed = f"for {causes} cause(s): {listed(f'{n}oo{causes}' for n in range(1, max(causes, 2)))}"
        if int(needed) > causes or int(of) != causes:
            message = f"{table.vote} does not fit {causes} cause(s): it can never be met as written"
            context.found.error("vote-impossible", place, message, allowed)
        elif int(needed) == causes > 1:
            message = f"with {table.vote} a single blind channel keeps the interlock from tripping"
            context.found.error("vote-all", place, message, allowed)
    if table.on_bad is OnBad.IGNORE and causes == 1:
        message = 'with one cause and on_bad = "ignore" a bad signal leaves no protection'
        remedy = 'write on_bad = "trip", or add a second sensor to trip_when'
        context.found.error("no-protection", (*table.key_path, "on_bad"), message, remedy)
    if table.startup and any(condition.above is not None for condition in table.trip_when):
        message = "an upper limit is absolute and counts from the first movement on"
        context.found.error("startup-on-limit", (*table.key_path, "startup"), message, "remove startup")
    if table.settling and not any(condition.differs_from for condition in table.trip_when):
        message = "settling belongs to a comparison with another tag (differs_from); absolute limits are always live"
        context.found.error("settling-unused", (*table.key_path, "settling"), message, "remove settling")


def _urgency(context: RigContext, table: AlarmTable) -> None:
    if table.priority is not None and table.follows is not None and table.priority != table.follows:
        message = f"priority is {table.priority!r}, but what it leads to makes it {table.follows!r}"
        context.found.warning("priority-unlike", (*table.key_path, "priority"), message, "leave priority out")
    limited = {cause.tag for lock in context.rig.interlocks for cause in lock.causes}
    within_s = table.respond_within
    if table.leads_to == "trip" and within_s is not None and within_s < CALL_OUT_S and table.when.tag not in limited:
        message = f"a person has {within_s / 60:g} min, less than it takes to come, and no interlock looks at"
        message += f" {table.when.tag}"
        context.found.warning("alarm-too-short", (*table.key_path, "respond_within"), message, "add an interlock")


CALL_OUT_S = 1800.0
"""Nobody is at the rig sooner than this after a call at night (proposal; no source)."""


def _limit(context: RigContext, cause: Condition, tag: Tag | None, place: Path) -> None:
    if tag is None or cause.kind not in (ConditionKind.HIGH, ConditionKind.LOW):
        return
    _against_span(context, cause, tag, place)
    if tag.measures == "volume" and tag.kind is TagKind.DERIVED and cause.kind is ConditionKind.HIGH:
        vessel = next((vessel for vessel in context.rig.vessels if vessel.id == tag.at), None)
        if vessel and cause.limit >= vessel.capacity_mL:
            message = f"{cause.limit:g} mL is not below the capacity of {vessel.id} ({vessel.capacity_mL:g} mL)"
            context.found.error("limit-above-capacity", place, message, "choose a limit below the capacity")
    if tag.measures == "pressure" and cause.kind is ConditionKind.HIGH:
        side = side_of(context.sides, tag.at)
        if side is not None:
            _against_rating(context, cause, side, place)


def _against_span(context: RigContext, cause: Condition, tag: Tag, place: Path) -> None:
    if tag.kind is not TagKind.MEASURED:
        return
    high = cause.kind is ConditionKind.HIGH
    beyond = cause.limit >= tag.high if high else cause.limit <= tag.low
    always = cause.limit < tag.low if high else cause.limit > tag.high
    if beyond or always:
        what = "can never be met" if beyond else "is always met"
        message = f"{tag.id} {'above' if high else 'below'} {cause.limit:g} {tag.unit} {what}: its span is"
        message += f" {tag.low:g} to {tag.high:g} {tag.unit}"
        context.found.error("limit-outside-span", place, message, "choose a limit inside the span, or another sensor")


def _against_rating(context: RigContext, cause: Condition, side: PressureSide, place: Path) -> None:
    if cause.limit >= side.rating_bar:
        message = f"{cause.limit:g} bar is not below the weakest rating under this pressure:"
        message += f" {side.weakest} holds {side.rating_bar:g} bar"
        remedy = f"choose a limit well below {side.rating_bar:g} bar, or fit a stronger {side.weakest}"
        context.found.error("limit-above-rating", place, message, remedy)
    ratio = cause.limit / side.rating_bar
    if any(abs(ratio / guess - 1) < _PSI_SLACK for guess in (PSI_PER_BAR, 1 / PSI_PER_BAR)):
        message = f"{cause.limit:g} bar is {ratio:.3g} times the rating of {side.weakest} ({side.rating_bar:g} bar):"
        message += " a number in psi written as bar?"
        remedy = 'look up the unit on the part and on the data sheet; psi may be written as such: "116 psi"'
        context.found.warning("psi-as-bar", place, message, remedy)


def _pressure_stop(context: RigContext, lock: Interlock, tags: dict[str, Tag]) -> None:
    over = [cause for cause in lock.causes if cause.kind is ConditionKind.HIGH and cause.tag in tags]
    if not any(tags[cause.tag].measures == "pressure" for cause in over):
        return
    if lock.stop is not Stop.CUT:
        message = f"over-pressure with stop = {lock.stop.name.lower()!r} pumps on against what may be a block"
        context.found.error(
            "pressure-not-cut", context.at("interlocks", lock.id, "stop"), message, 'write stop = "cut"'
        )
    if lock.armed is not Armed.ALWAYS:
        place = context.at("interlocks", lock.id, "armed")
        message = "an absolute pressure limit must count always, not only while something moves"
        context.found.error("limit-not-armed", place, message, 'write armed = "always" or remove the key')


def _unprotected(context: RigContext, tags: dict[str, Tag]) -> None:
    """Rated parts under pressure that no pressure interlock watches."""
    if not context.whole("interlocks", "sensors", "lines"):
        return
    locks = [lock for lock in context.rig.interlocks if lock.stop is Stop.CUT]
    causes = [cause for lock in locks for cause in lock.causes if cause.kind is ConditionKind.HIGH]
    places = {tags[cause.tag].at for cause in causes if cause.tag in tags and tags[cause.tag].measures == "pressure"}
    if sum(not lock.built_in for lock in context.rig.interlocks) < len(context.file.interlocks):
        return  # one of them could not be made; it may be the missing one
    for side in context.sides:
        if not any(side_of((side,), place) for place in places):
            pumps = [pump.id for pump in context.rig.pumps if pump.id in side.parts]
            message = f"nothing trips on the pressure behind {listed(pumps)}; the weakest part there is {side.weakest}"
            message += f" ({side.rating_bar:g} bar)"
            remedy = 'add an [[interlocks]] table with a pressure sensor of this side and stop = "cut"'
            context.found.warning("rating-unprotected", context.at("pumps", pumps[0], "rating"), message, remedy)
