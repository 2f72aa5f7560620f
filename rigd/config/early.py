"""Tags and alarms of the early rules: implied by the sensors a rig has, with the limits of its table ``[early]``.

An alarm that the rig file declares under the same id stands in the place of the implied one.
"""

from __future__ import annotations

from collections.abc import Iterator

from rigd.config.table import ns
from rigd.logic.early.resistance import FAR_S
from rigd.logic.early.watch import EarlyPlan, plan_of
from rigd.logic.flow_path import FlowPathError, flow_path
from rigd.model.early import EarlyLimits
from rigd.model.protection import Alarm, Condition, ConditionKind, Priority
from rigd.model.rig import RigDefinition, Tag, TagKind
from rigd.model.units import HOUSE

LOOK_S = 5.0
ON_S, OFF_S = 20.0, 300.0
"""Four looks must agree before a person is told; what comes and goes with refills stands (proposal; no source)."""


def early_plan(rig: RigDefinition) -> EarlyPlan:
    """What can be watched of a rig; nothing of one whose lines make no path (the checks say so)."""
    try:
        return plan_of(rig, None, flow_path(rig))
    except FlowPathError:
        return EarlyPlan()


def early_tags(plan: EarlyPlan) -> tuple[Tag, ...]:
    """The tags in which the early rules say what they found."""
    found = []
    for one in plan.stretches:
        found.append(_tag(one.upper, "resistance", f"resistance {one.words} over the learned one", "fraction", 100.0))
        if one.limits:
            found.append(_tag(one.upper, "time-left", f"time until a limit upstream of {one.upper}", "time", FAR_S))
    if plan.stiff:
        found.append(_tag(plan.stiff, "compliance", "compliance of the shut path", "compliance", 10.0))
    found += [_tag(one.tag, "balance", f"{one.tag} over what the pumps count", "fraction", 10.0) for one in plan.meters]
    for bed in plan.beds:
        found.append(
            _tag(bed.tag, "unexplained", f"{bed.tag} over what can be explained", "temperature difference", 500)
        )
    return tuple(found)


def _tag(of: str, channel: str, title: str, dimension: str, high: float) -> Tag:
    return Tag(
        id=f"{of}.{channel}",
        title=title,
        kind=TagKind.DERIVED,
        measures=dimension,
        unit=HOUSE[dimension],
        low=-high if dimension == "temperature difference" else 0.0,
        high=high,
        device="",
        channel="",
        period_ns=ns(LOOK_S),
        stale_ns=ns(10 * LOOK_S),
        at=of,
    )


def early_alarms(plan: EarlyPlan, limits: EarlyLimits, declared: frozenset[str]) -> tuple[Alarm, ...]:
    """The alarms on those tags, but for the ids that the rig file declares itself."""
    return tuple(alarm for alarm in _alarms(plan, limits) if alarm.id not in declared)


def _alarms(plan: EarlyPlan, limits: EarlyLimits) -> Iterator[Alarm]:
    for one in plan.stretches:
        yield _clog(one.upper, one.words, limits)
        yield _open(one.upper, one.words, limits)
        if one.limits:
            yield _soon(one.upper, one.words, limits)
    if plan.stiff:
        yield _gas(plan.stiff, plan.compliance_mL_bar * (1.0 + limits.compliance))
        yield _stiff(plan.stiff, plan.compliance_mL_bar * (1.0 - limits.stiffer))
    for meter in plan.meters:
        yield _short(meter.tag, limits)
    for bed in plan.beds:
        yield _hot(bed.tag, limits)


def _alarm(
    name: str, title: str, condition: Condition, priority: Priority, action: str, cause: str, consequence: str
) -> Alarm:
    return Alarm(
        name, title, condition, priority, action, cause, consequence, on_delay_ns=ns(ON_S), off_delay_ns=ns(OFF_S)
    )


def _clog(tag: str, words: str, limits: EarlyLimits) -> Alarm:
    limit = 1.0 + limits.resistance_up
    return _alarm(
        f"CLOG-{tag}",
        f"The path {words} closes",
        Condition(ConditionKind.HIGH, f"{tag}.resistance", limit, deadband=0.25 * limits.resistance_up),
        Priority.MEDIUM,
        "Lower the flow or hold the run; look for fines, precipitate, a pressed bed or a filter that fills.",
        "something closes the path slowly, or the liquid is more viscous than stated",
        "the pressure rises until the run trips",
    )


def _open(tag: str, words: str, limits: EarlyLimits) -> Alarm:
    limit = 1.0 - limits.resistance_down
    return _alarm(
        f"OPEN-{tag}",
        f"The path {words} opens or loses liquid",
        Condition(ConditionKind.LOW, f"{tag}.resistance", limit, deadband=0.25 * limits.resistance_down),
        Priority.HIGH,
        "Look for liquid on the bench and for gas in the lines; check that each pump delivers; in doubt hold the run.",
        "a leak, gas in the path, a pump that slips, or a channel through the bed",
        "less liquid passes the bed than was ordered, and the rest may run out",
    )


def _soon(tag: str, words: str, limits: EarlyLimits) -> Alarm:
    return _alarm(
        f"SOON-{tag}",
        f"A trip comes near: the path {words} closes",
        Condition(ConditionKind.LOW, f"{tag}.time-left", limits.time_left_s, deadband=0.5 * limits.time_left_s),
        Priority.HIGH,
        "Lower the flow or stop with a flush now, before the limit cuts the run with reagent in the bed.",
        "the resistance grows",
        "the run trips within the time told",
    )


def _gas(tag: str, limit: float) -> Alarm:
    return _alarm(
        f"GAS-{tag}",
        "There is gas in the path",
        Condition(ConditionKind.HIGH, f"{tag}.compliance", limit),
        Priority.MEDIUM,
        "Flush at a high flow until no bubbles come; look for an inlet line that draws air.",
        "a bubble, an empty bottle, or liquid that gives off gas",
        "residence times are wrong, and gas under pressure drives liquid on after a stop",
    )


def _stiff(tag: str, limit: float) -> Alarm:
    return _alarm(
        f"STIFF-{tag}",
        "The path is stiffer than stated: a block leaves less time",
        Condition(ConditionKind.LOW, f"{tag}.compliance", limit),
        Priority.MEDIUM,
        "Write the measured compliance into the rig file and run: rigd check.",
        "the pumps' compliance in the rig file is too large",
        "the pressure rises faster in a blocked path than was reckoned with",
    )


def _short(tag: str, limits: EarlyLimits) -> Alarm:
    return _alarm(
        f"SHORT-{tag}",
        f"{tag} sees less than was pumped",
        Condition(ConditionKind.LOW, f"{tag}.balance", 1.0 - limits.balance, deadband=0.25 * limits.balance),
        Priority.HIGH,
        "Look for liquid on the bench; check that each pump delivers and that its syringe holds no gas.",
        "a leak, a pump that slips or draws air, or another syringe than declared",
        "flows and residence times are not the planned ones, and liquid may run out",
    )


def _hot(tag: str, limits: EarlyLimits) -> Alarm:
    return _alarm(
        f"HEAT-{tag}",
        "The bed is warmer than bath and chemistry can make it",
        Condition(ConditionKind.HIGH, f"{tag}.unexplained", limits.heat_K, deadband=0.25 * limits.heat_K),
        Priority.HIGH,
        "Take the reagent off and flush with solvent; look for a reaction that was not planned and at the circulation.",
        "a side reaction, a fresh catalyst, reagent that has piled up, or a jacket without flow",
        "the bed runs away towards its limit",
    )
