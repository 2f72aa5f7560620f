"""Sentences and fields for the record: what happened, value, limit, what the rig did, what the person should do."""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import TYPE_CHECKING

from rigd.logic.protect import alarms, interlocks
from rigd.logic.protect.alarm_core import AlarmEvent, AlarmState
from rigd.logic.protect.alarm_overlay import FlagEvent
from rigd.logic.protect.conditions import Conditions, Watch, slope_per_s
from rigd.logic.protect.faults import Faults
from rigd.logic.protect.latch import LatchState
from rigd.logic.protect.signals import Signals
from rigd.model.events import Event, EventKind
from rigd.model.orders import Request
from rigd.model.protection import Condition, ConditionKind
from rigd.model.samples import Quality, Sample

if TYPE_CHECKING:
    from rigd.logic.program import Program

Fields = dict[str, str | float | int | bool]


class Words:
    """Makes events of one scan; knows the image that the sentences speak of."""

    __slots__ = ("_conditions", "_faults", "_now_ns", "_program", "_remarks", "_signals")

    def __init__(
        self,
        program: Program,
        signals: Signals,
        conditions: Conditions,
        faults: Faults,
        now_ns: int,
        remarks: Mapping[str, str],
    ) -> None:
        self._program = program
        self._signals = signals
        self._conditions = conditions
        self._faults = faults
        self._now_ns = now_ns
        self._remarks = remarks

    def interlock(self, change: interlocks.Change) -> Event:
        """The event of one transition of an interlock."""
        found, cause = change.interlock, self._cause_of(change)
        fields: Fields = {"state": str(change.after), "from": str(change.before), "number": change.number}
        text = f"{found.id} ({found.title}): {_interlock_words(change)}{f', {cause}' if cause else ''}."
        return Event(EventKind.INTERLOCK, found.id, self._now_ns, text, fields)

    def _cause_of(self, change: interlocks.Change) -> str:
        return self.cause(self._program.watches[change.causes[0]]) if change.causes else change.note

    def trip(self, change: interlocks.Change, first_out: str, did: str) -> Event:
        """The event of a trip; ``did`` is what the rig was really made to do."""
        found, cause = change.interlock, self._cause_of(change)
        watch = self._program.watches[change.causes[0]] if change.causes else None
        do = found.response or "Find the cause before a reset."
        order = "first-out" if change.number == 1 else f"number {change.number} after {first_out}"
        text = f"{found.title}: {cause}, so {did} ({found.id}, {order}). {do}"
        fields: Fields = {
            "first_out": first_out,
            "number": change.number,
            "stop": found.stop.name.lower(),
            "did": did,
            "do": do,
            "cause": cause,
            **self._measured(watch),
        }
        return Event(EventKind.TRIP, found.id, self._now_ns, text, fields)

    def _measured(self, watch: Watch | None) -> Fields:
        """Tag, value, limit, unit and the samples before, oldest first, as "age/value" with a mark for a bad one."""
        if watch is None:
            return {"tag": "", "value": "", "limit": "", "unit": "", "samples": ""}
        tag = watch.tag or watch.condition.tag
        ring = self._signals.rings.get(tag, ())
        return {
            "tag": tag,
            "value": self._value(watch),
            "limit": watch.condition.limit,
            "unit": self._unit(watch),
            "samples": " ".join(_compact(sample, self._now_ns) for sample in ring),
        }

    def alarm(self, change: alarms.Change) -> Event:
        """The event of one change of an alarm."""
        found, after = change.alarm, change.after
        watch = self._program.causes[found.id][0]
        sample = self._signals.samples.get(watch.tag)
        fields: Fields = {
            "state": after.words,
            "from": change.before.words,
            "event": str(change.event),
            "priority": int(found.priority),
            "type": str(watch.condition.kind),
            "tag": watch.tag or watch.condition.tag,
            "value": self._value(watch),
            "quality": "" if sample is None else sample.quality.name.lower(),
            "limit": watch.condition.limit,
            "unit": self._unit(watch),
            "deadband": watch.condition.deadband,
            "on_delay_s": found.on_delay_ns / 1e9,
            "off_delay_s": found.off_delay_ns / 1e9,
            "do": found.action,
            "announce": str(change.announce),
            "by": change.by,
            "reason": change.reason,
        }
        if after.flag is not None:
            fields["hidden"] = after.state.words
        if after.shelved is not None:
            fields["left_s"] = (after.shelved.until_ns - self._now_ns) / 1e9
        return Event(EventKind.ALARM, found.id, self._now_ns, self._alarm_words(change, watch), fields)

    def _alarm_words(self, change: alarms.Change, watch: Watch) -> str:
        found, after = change.alarm, change.after
        by = f" by {change.by}" if change.by else ""
        head = f"{found.title} ({found.id}): {after.words}{by}"
        if after.flag is None:
            stands = after.state in (AlarmState.UNACKNOWLEDGED, AlarmState.ACKNOWLEDGED)
            return head + (f", {self.cause(watch)}. {found.action}" if stands else ".")
        if isinstance(change.event, AlarmEvent):
            return f"{head}; {after.state.words} behind that, {self.cause(watch)}."
        span = f" for {(after.until_ns - self._now_ns) / 60e9:.3g} min" if change.event is FlagEvent.SHELVE else ""
        return f"{head}{span}{f': {change.reason}' if change.reason else ''}."

    def request(self, request: Request, refusal: str, detail: str) -> Event:
        """The one event that answers a request."""
        who = request.who or "somebody"
        target = f" {request.target}" if request.target else ""
        asked = f"{who} asked for '{request.verb}{target}'"
        text = f"{asked}: refused, {refusal}." if refusal else f"{asked}: {detail}."
        fields: Fields = {
            "request_id": request.id,
            "who": request.who,
            "target": request.target,
            "result": "refused" if refusal else "accepted",
            "detail": refusal or detail,
        }
        return Event(EventKind.REQUEST, str(request.verb), self._now_ns, text, fields)

    def fault(self, name: str, detail: str) -> Event:
        """A fault of the daemon that was not there before."""
        text = f"Fault '{name}'{f': {detail}' if detail else ''}."
        return Event(EventKind.FAULT, name, self._now_ns, text, {"detail": detail})

    def cause(self, watch: Watch) -> str:
        """What a condition sees, as a clause without a full stop."""
        condition, sample = watch.condition, self._signals.samples.get(watch.tag)
        if not watch.tag:
            return self._untagged(condition)
        if sample is None:
            return f"{watch.tag} was never seen"
        if watch.tag in self._remarks:
            return self._remarks[watch.tag]
        if sample.quality is Quality.BAD:
            return (
                f"{watch.tag} cannot be believed ({sample.cause}, last value {self._number(watch.tag, sample.value)})"
            )
        reads = f"{watch.tag} read {self._number(watch.tag, sample.value)}"
        limit = self._number(watch.tag, condition.limit)
        match condition.kind:
            case ConditionKind.HIGH:
                return f"{reads}, above its limit of {limit}"
            case ConditionKind.LOW:
                return f"{reads}, below its limit of {limit}"
            case ConditionKind.RATE:
                slope = f"{slope_per_s(self._conditions.windows.get(watch.index, ())):.4g}"
                return f"{watch.tag} changes by {slope} {self._unit(watch)}, limit {condition.limit:g}"
            case ConditionKind.DEVIATION | ConditionKind.DISCREPANCY:
                reference = self._signals.samples.get(condition.reference)
                if reference is None or reference.quality is Quality.BAD:
                    why = "never seen" if reference is None else str(reference.cause)
                    return f"{condition.reference}, with which {watch.tag} is compared, cannot be believed ({why})"
                shown = self._number(condition.reference, reference.value)
                return f"{reads}, more than {condition.limit:g} away from {condition.reference} ({shown})"
            case ConditionKind.MISMATCH:
                return f"{reads}, which is not what it was told"
            case ConditionKind.DIFFERS:
                return f"{reads} instead of {limit}"
            case _:
                return reads

    def _untagged(self, condition: Condition) -> str:
        detail = self._faults.detail(condition.kind, condition.tag)
        if condition.kind is ConditionKind.LINK:
            status = self._signals.devices.get(condition.tag)
            why = "" if status is None else status.detail or str(status.link)
            return f"{condition.tag} does not answer{f' ({why})' if why else ''}"
        if condition.kind is ConditionKind.POWER_CYCLED:
            return f"{condition.tag}: {detail}" if detail else f"{condition.tag} restarted"
        return detail or condition.tag

    def _value(self, watch: Watch) -> float | str:
        sample = self._signals.samples.get(watch.tag)
        if sample is None:
            return ""
        return sample.value if math.isfinite(sample.value) else str(sample.cause)

    def _unit(self, watch: Watch) -> str:
        tag = self._program.tags.get(watch.tag)
        unit = "" if tag is None else tag.unit
        return f"{unit}/s" if watch.condition.kind is ConditionKind.RATE else unit

    def _number(self, name: str, value: float) -> str:
        tag = self._program.tags.get(name)
        if tag is None or not math.isfinite(value):
            return f"{value:g}"
        return label(tag.labels, value) or f"{value:.4g} {tag.unit}".strip()


def label(labels: tuple[str, ...], value: float) -> str:
    """The word for a state or position, "" when there is none."""
    return labels[int(value)] if labels and math.isfinite(value) and 0 <= value < len(labels) else ""


def _compact(sample: Sample, now_ns: int) -> str:
    mark = {Quality.GOOD: "", Quality.UNCERTAIN: "?", Quality.BAD: "!"}[sample.quality]
    return f"{(sample.t_ns - now_ns) / 1e9:.3f}/{sample.value:.6g}{mark}"


def _interlock_words(change: interlocks.Change) -> str:
    if change.before == change.after:
        return "one more cause" if change.causes and not change.after.permits else "noted"
    return {
        LatchState.HEALTHY: "healthy",
        LatchState.TRIPPED_ACTIVE: "tripped",
        LatchState.TRIPPED_CLEAR: "cause gone, waits for a reset",
        LatchState.BYPASSED: "bypassed",
        LatchState.INIT: "",
    }[change.after]
