"""What is in each syringe: followed from the pumps' own channels, never assumed from what was ordered.

A pump with two syringes changes over by itself when the active one is empty. That is seen as a rise of ``level``, which
nothing else causes on such a pump; what the syringes hold changes places with it.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

from rigd.logic.conduct.layout import UNKNOWN, PumpLayout, liquid_of
from rigd.logic.estimators import Front
from rigd.logic.view import View
from rigd.model.devices import PumpState
from rigd.model.events import Event, EventKind
from rigd.model.orders import Action, Outcome, Result

EMPTY_mL = 0.01
_CHANGE_mL = 0.01
_FULL_mL = 0.02
_EXACT_mL = 0.002
ATTEMPTS = 4
_REFUSED_NS = 2_000_000_000
Fields = dict[str, str | float | int | bool]
_NO_FRONT = Front(UNKNOWN, -1e9)


@dataclass(frozen=True, slots=True)
class Fill:
    """A filling under way. ``moved_ns`` is when the liquid last rose, ``seen_mL`` how far.

    ``broken``: a stop of the pump has ended it; it is asked for again once the pump rests. ``unwanted``: nobody wants
    it any more; it may still end, for a feed valve never moves while liquid is drawn through it.
    """

    ticket: str
    label: str
    volume_mL: float
    started_ns: int
    moved_ns: int
    seen_mL: float
    attempt: int = 1
    broken: bool = False
    unwanted: bool = False


@dataclass(frozen=True, slots=True)
class PumpTrack:
    """One pump as last seen; ``t_ns`` 0 means never.

    ``active`` and ``standby`` say what is in the syringes, ``drawn`` what was drawn last and fills the line from the
    valve; ``front`` when the liquid in the active syringe began to leave.
    ``swapped_mL`` is the counter at the last change-over, ``swap`` the ticket of one that was asked for and
    ``swap_done_ns`` when the pump said yes to it; ``moving_ns`` is since when it was told to move (-1: to rest).
    """

    active: str = UNKNOWN
    standby: str = UNKNOWN
    level_mL: float = 0.0
    standby_mL: float = 0.0
    delivered_mL: float = 0.0
    flow_mL_min: float = 0.0
    state: PumpState = PumpState.STOPPED
    t_ns: int = 0
    front: Front = _NO_FRONT
    swapped_mL: float = -1e9
    drawn: str = UNKNOWN
    fill: Fill | None = None
    swap: str = ""
    swap_done_ns: int = -1
    tickets: int = 0
    moving_ns: int = -1
    refused_ns: int = -1
    trouble: str = ""

    def delivered_at(self, now_ns: int) -> float:
        """Counter carried forward to now at the flow last seen; never more than is in the syringe."""
        return self.delivered_mL + min(self._moved_mL(now_ns), max(self.level_mL, 0.0))

    def level_at(self, now_ns: int) -> float:
        """Level of the active syringe carried forward to now."""
        return max(0.0, self.level_mL - self._moved_mL(now_ns))

    def _moved_mL(self, now_ns: int) -> float:
        return max(0.0, self.flow_mL_min) * max(0, now_ns - self.t_ns) / 60e9

    def supply_mL(self, label: str, now_ns: int) -> float:
        """What is at hand of a liquid."""
        active = self.level_at(now_ns) if self.active == label else 0.0
        return active + (self.standby_mL if self.standby == label else 0.0)

    @property
    def at_rest(self) -> bool:
        """True when the pump says that nothing moves."""
        return self.state in (PumpState.STOPPED, PumpState.EMPTY) and self.flow_mL_min == 0.0


def update(track: PumpTrack, play: PumpLayout, view: View) -> tuple[PumpTrack, tuple[Event, ...]]:
    """Take this scan's samples and outcomes of one pump."""
    track = _answers(track, play, view.outcomes, view.now_ns)
    if not any(play.tag(channel) in view.fresh for channel in ("level", "standby", "delivered", "flow", "state")):
        return track, ()
    seen = _read(track, play, view)
    events: tuple[Event, ...] = ()
    rose = seen.level_mL > track.level_mL + _CHANGE_mL and track.t_ns > 0
    obeyed = bool(track.swap) and 0 <= track.swap_done_ns <= seen.t_ns
    if play.dual and (rose or obeyed):
        seen, events = _swapped(track, seen, play)
    return _filled(seen, play, view.now_ns, events)


def _read(track: PumpTrack, play: PumpLayout, view: View) -> PumpTrack:
    """The channels of the pump; what is bad or missing keeps its last value."""

    def value(channel: str, last: float) -> float:
        found = view.value(play.tag(channel))
        return last if found is None else found

    level = view.samples.get(play.tag("level"))
    return replace(
        track,
        level_mL=value("level", track.level_mL),
        standby_mL=value("standby", track.standby_mL),
        delivered_mL=value("delivered", track.delivered_mL),
        flow_mL_min=value("flow", track.flow_mL_min),
        state=PumpState(int(value("state", float(track.state)))),
        t_ns=level.t_ns if level else track.t_ns,
    )


def _swapped(before: PumpTrack, seen: PumpTrack, play: PumpLayout) -> tuple[PumpTrack, tuple[Event, ...]]:
    """The syringes have changed places; a filling under way must have ended before."""
    drawn_mL = play.pump.refill_rate_mL_min * (seen.t_ns - before.t_ns) / 60e9 if before.fill else 0.0
    full_mL = min(before.standby_mL + drawn_mL, before.fill.volume_mL if before.fill else before.standby_mL)
    start_mL = seen.delivered_mL - max(0.0, full_mL - seen.level_mL)
    front = before.front if before.standby == before.active else Front(before.standby, start_mL)
    track = replace(
        seen,
        active=before.standby,
        standby=before.active,
        front=front,
        swapped_mL=start_mL,
        swap="",
        swap_done_ns=-1,
        fill=None,
    )
    text = f"{play.id} changed over to the other syringe ({liquid_of(track.active) or 'unknown liquid'})."
    done = _refill_event(before.fill, play, seen.t_ns) if before.fill else ()
    fields: Fields = {"status": "changed over", "liquid": liquid_of(track.active)}
    return track, (*done, Event(EventKind.REFILL, play.id, seen.t_ns, text, fields))


def _filled(
    track: PumpTrack, play: PumpLayout, now_ns: int, events: tuple[Event, ...]
) -> tuple[PumpTrack, tuple[Event, ...]]:
    """Follow a filling: it rises, it is done, or it has stood still for too long and is asked for again."""
    fill = track.fill
    if fill is None:
        return track, events
    now_mL = track.standby_mL if play.dual else track.level_mL
    moving = not play.dual and track.state is PumpState.REFILLING
    near = now_mL >= fill.volume_mL - _FULL_mL and now_mL <= fill.seen_mL + 1e-4
    if (near or now_mL >= fill.volume_mL - _EXACT_mL) and not moving:
        return _done(track, fill, play), (*events, *_refill_event(fill, play, now_ns))
    if fill.broken and track.at_rest:
        if fill.unwanted:
            return replace(track, fill=None), events
        return _again(track, replace(fill, attempt=fill.attempt - 1), play, now_ns), events
    if now_mL > fill.seen_mL + 1e-4:
        return replace(track, fill=replace(fill, seen_mL=now_mL, moved_ns=now_ns)), events
    if now_ns - fill.moved_ns > _patience_ns(play):
        if fill.unwanted:
            return replace(track, fill=None), events
        return _again(track, fill, play, now_ns), events
    return track, events


def _patience_ns(play: PumpLayout) -> int:
    """How long a filling may stand still before it is asked for again."""
    return int((4.0 + 4.0 * play.period_s) * 1e9)


def _done(track: PumpTrack, fill: Fill, play: PumpLayout) -> PumpTrack:
    if play.dual:
        return replace(track, fill=None, standby=fill.label)
    front = track.front if track.active == fill.label else Front(fill.label, track.delivered_mL)
    return replace(track, fill=None, active=fill.label, front=front, swapped_mL=track.delivered_mL)


def _refill_event(fill: Fill, play: PumpLayout, t_ns: int) -> tuple[Event, ...]:
    text = f"{play.id} is filled to {fill.volume_mL:.3g} mL of {liquid_of(fill.label)}."
    fields: Fields = {"status": "done", "liquid": liquid_of(fill.label), "volume_mL": round(fill.volume_mL, 4)}
    return (Event(EventKind.REFILL, play.id, t_ns, text, fields),)


def _again(track: PumpTrack, fill: Fill, play: PumpLayout, now_ns: int) -> PumpTrack:
    """A new ticket for the same filling; after a few the pump is in trouble."""
    if fill.attempt >= ATTEMPTS:
        text = f"{play.id} does not fill: {fill.seen_mL:.2f} of {fill.volume_mL:.2f} mL after {ATTEMPTS} attempts"
        return replace(track, fill=None, trouble=text)
    number = track.tickets + 1
    again = replace(fill, ticket=f"{play.id}#{number}", moved_ns=now_ns, attempt=fill.attempt + 1, broken=False)
    return replace(track, fill=again, tickets=number)


def _answers(track: PumpTrack, play: PumpLayout, outcomes: tuple[Outcome, ...], now_ns: int) -> PumpTrack:
    """What the pump said to a filling or a change-over. One that it refused is asked for anew, with a new ticket.

    Not at once: a pump that is busy says no to each attempt within a moment. Unless the liquid rises meanwhile.
    """
    for outcome in outcomes:
        if outcome.unit != play.id:
            continue
        refused = outcome.result is Result.REFUSED
        if outcome.action is Action.FILL and track.fill and refused:
            moved_ns = now_ns + _REFUSED_NS - _patience_ns(play)
            track = replace(track, fill=replace(track.fill, moved_ns=moved_ns))
        elif outcome.action is Action.SWAP and track.swap and refused:
            track = replace(track, swap="", refused_ns=now_ns)
        elif outcome.action is Action.SWAP and track.swap and outcome.result is Result.DONE:
            track = replace(track, swap_done_ns=outcome.t_ns)
    return track


def start_fill(track: PumpTrack, play: PumpLayout, label: str, volume_mL: float, now_ns: int) -> PumpTrack:
    """Ask for a filling up to ``volume_mL`` in the filling syringe."""
    number = track.tickets + 1
    now_mL = track.standby_mL if play.dual else track.level_mL
    fill = Fill(f"{play.id}#{number}", label, round(volume_mL, 3), now_ns, now_ns, now_mL)
    standby = label if play.dual else track.standby
    return replace(track, fill=fill, standby=standby, drawn=liquid_of(label), tickets=number)


def start_swap(track: PumpTrack, play: PumpLayout) -> PumpTrack:
    """Ask for a change to the standby syringe."""
    number = track.tickets + 1
    return replace(track, swap=f"{play.id}#{number}", tickets=number)
