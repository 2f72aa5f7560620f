"""A condition as people say it, the same in the terminal and on the page."""

from __future__ import annotations

from collections.abc import Callable

from rigd.model.protection import Condition, ConditionKind
from rigd.model.rig import RigDefinition, Tag

_WORDS: dict[ConditionKind, Callable[[Condition, str], str]] = {
    ConditionKind.HIGH: lambda cause, limit: f"above {limit}",
    ConditionKind.LOW: lambda cause, limit: f"below {limit}",
    ConditionKind.RATE: lambda cause, limit: f"rises faster than {limit}/s",
    ConditionKind.DEVIATION: lambda cause, limit: f"away from {cause.reference} by {limit.replace('degC', 'K')}",
    ConditionKind.DISCREPANCY: lambda cause, limit: f"and {cause.reference} apart by {limit.replace('degC', 'K')}",
    ConditionKind.EQUALS: lambda cause, limit: f"is {limit}",
    ConditionKind.DIFFERS: lambda cause, limit: f"is not {limit}",
    ConditionKind.MISMATCH: lambda cause, limit: "not where it was told to be",
    ConditionKind.BAD: lambda cause, limit: "cannot be believed",
    ConditionKind.STALE: lambda cause, limit: "not renewed in time",
    ConditionKind.FROZEN: lambda cause, limit: "stands still",
    ConditionKind.OUT_OF_SPAN: lambda cause, limit: "beyond its span",
    ConditionKind.DIAGNOSTIC: lambda cause, limit: "says itself that it is wrong",
    ConditionKind.LINK: lambda cause, limit: "does not answer",
    ConditionKind.POWER_CYCLED: lambda cause, limit: "restarted or is another device",
    ConditionKind.FAULT: lambda cause, limit: "failed",
}


def condition_words(rig: RigDefinition, cause: Condition) -> str:
    """A condition as a clause: ``PT-1 above 8 bar``."""
    tag = next((tag for tag in rig.tags if tag.id == cause.tag), None)
    return f"{cause.tag} {_WORDS[cause.kind](cause, _limit(tag, cause.limit))}"


def _limit(tag: Tag | None, limit: float) -> str:
    if tag is None:
        return f"{limit:g}"
    if tag.labels and 0 <= limit < len(tag.labels):
        return tag.labels[int(limit)]
    if tag.unit == "1":
        return f"{100 * limit:g} %"
    return f"{limit:g} {tag.unit}".strip()
