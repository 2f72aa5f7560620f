"""How the alarms of a run behaved: how many a person was told, how bunched, and which of them were a nuisance.

Figures after ANSI/ISA-18.2-2016 and IEC 62682, from memory (ten in ten minutes begin a flood, below five end it; about
six an hour is what one person bears; three of one alarm in a minute is chatter; a day of standing is stale); of a
fleeting alarm there is no figure in them, five seconds are our own.
"""

from __future__ import annotations

from bisect import bisect_right
from collections import Counter
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass

from rigd.model.events import Event, EventKind

PERIOD_S = 600.0
FLOOD_BEGINS, FLOOD_ENDS = 10, 5
"""A flood begins with more than the first number in a period and ends with fewer than the second."""
CHATTER, CHATTER_S = 3, 60.0
FLEETING_S = 5.0
STALE_S = 86_400.0
PRIORITIES = {1: "highest", 2: "high", 3: "medium", 4: "low"}
TOLD = ("new", "again")


@dataclass(frozen=True, slots=True)
class AlarmLoad:
    """What a run told a person. ``busiest`` is the largest number in ten minutes; ``flood_s`` the time in flood; the
    four lists hold alarm ids. ``hidden`` is how often an alarm was shelved or taken out of service, ``unheard`` how
    often one came while it was hidden. ``nuisance`` are those that chatter, are fleeting or stale; ``share_of_ten`` is
    what the ten most frequent alarms are of all that was told (targets: none, and at most 5 %)."""

    told: int
    per_hour: float
    busiest: int
    flood_s: float
    by_priority: dict[str, int]
    most_frequent: tuple[tuple[str, int], ...]
    chattering: tuple[str, ...]
    fleeting: tuple[str, ...]
    stale: tuple[str, ...]
    standing: tuple[str, ...]
    hidden: int
    unheard: int = 0
    nuisance: tuple[str, ...] = ()
    share_of_ten: float = 0.0

    @property
    def words(self) -> str:
        """One line for people."""
        parts = [f"{self.told} told, at most {self.busiest} in ten minutes"]
        if self.flood_s:
            parts.append(f"in flood for {self.flood_s / 60:.0f} min")
        for name in ("chattering", "fleeting", "stale", "standing"):
            if found := getattr(self, name):
                parts.append(
                    f"{name}: {', '.join(found)}" if name != "standing" else f"still there: {', '.join(found)}"
                )
        return "; ".join(parts)


def alarm_load(events: Sequence[Event], duration_s: float) -> AlarmLoad:
    """The load of a run from its events; ``duration_s`` is how long it lasted."""
    found = [event for event in events if event.kind is EventKind.ALARM]
    told = [event for event in found if event.fields.get("announce") in TOLD]
    times_s = [event.t_ns / 1e9 for event in told]
    counts = Counter(event.subject for event in told)
    priorities = Counter(int(event.fields.get("priority", 4)) for event in told)
    spans = list(_spans(found, duration_s))
    chattering = _chattering(found)
    fleeting = _once(span.alarm for span in spans if span.lasted_s <= FLEETING_S and span.ended and not span.seen)
    stale = _once(span.alarm for span in spans if span.lasted_s > STALE_S)
    return AlarmLoad(
        told=len(told),
        per_hour=3600.0 * len(told) / duration_s if duration_s else 0.0,
        busiest=max((_within(times_s, at_s, PERIOD_S) for at_s in times_s), default=0),
        flood_s=_flood_s(times_s, duration_s),
        by_priority={name: priorities[number] for number, name in PRIORITIES.items() if priorities[number]},
        most_frequent=tuple(counts.most_common(10)),
        chattering=chattering,
        fleeting=fleeting,
        stale=stale,
        standing=_once(span.alarm for span in spans if not span.ended),
        hidden=sum(event.fields.get("event") in ("SHELVE", "REMOVE") for event in found),
        unheard=sum(event.fields.get("event") == "COND_ON" and "hidden" in event.fields for event in found),
        nuisance=_once((*chattering, *fleeting, *stale)),
        share_of_ten=sum(number for _, number in counts.most_common(10)) / len(told) if told else 0.0,
    )


def _within(times_s: Sequence[float], end_s: float, period_s: float) -> int:
    """How many fall into the period that ends then."""
    return bisect_right(times_s, end_s) - bisect_right(times_s, end_s - period_s)


def _flood_s(times_s: Sequence[float], duration_s: float) -> float:
    """Time in flood, judged at every alarm and at every moment when one leaves the period."""
    total, since_s = 0.0, None
    moments = {*times_s, *(at_s + PERIOD_S for at_s in times_s)}
    for at_s in sorted(at_s for at_s in moments if at_s < duration_s):
        number = _within(times_s, at_s, PERIOD_S)
        if since_s is None and number > FLOOD_BEGINS:
            since_s = at_s
        elif since_s is not None and number < FLOOD_ENDS:
            total, since_s = total + at_s - since_s, None
    return total + (duration_s - since_s if since_s is not None else 0.0)


def _chattering(events: Iterable[Event]) -> tuple[str, ...]:
    """Alarms that came three times or more within a minute, told or not."""
    came: dict[str, list[float]] = {}
    for event in events:
        if event.fields.get("event") == "COND_ON":
            came.setdefault(event.subject, []).append(event.t_ns / 1e9)
    return tuple(
        name for name, times_s in came.items() if any(_within(times_s, at_s, CHATTER_S) >= CHATTER for at_s in times_s)
    )


@dataclass(frozen=True, slots=True)
class _Span:
    """One time that a condition stood; ``seen``: acknowledged meanwhile."""

    alarm: str
    lasted_s: float
    seen: bool
    ended: bool = True


def _once(names: Iterable[str]) -> tuple[str, ...]:
    return tuple(dict.fromkeys(names))


def _spans(events: Iterable[Event], duration_s: float) -> Iterator[_Span]:
    """Each time that a condition stood; the last ones to the end of the run."""
    since_s: dict[str, float] = {}
    seen: set[str] = set()
    for event in events:
        what, name = event.fields.get("event"), event.subject
        if what == "COND_ON":
            since_s[name] = event.t_ns / 1e9
            seen.discard(name)
        elif what == "ACK":
            seen.add(name)
        elif what == "COND_OFF" and name in since_s:
            yield _Span(name, event.t_ns / 1e9 - since_s.pop(name), name in seen)
    for name, start_s in since_s.items():
        yield _Span(name, duration_s - start_s, name in seen, ended=False)
