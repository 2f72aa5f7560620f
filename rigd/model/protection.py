"""Conditions, interlocks and alarms as declared; their running state lives in ``rigd.logic.protect``."""

from __future__ import annotations

from dataclasses import dataclass
from enum import IntEnum, StrEnum

from rigd.model.orders import Stop


class ConditionKind(StrEnum):
    """How a tag (or the rig itself) is compared. ``limit`` is in the tag's unit unless said otherwise."""

    HIGH = "high"  # value > limit
    LOW = "low"  # value < limit
    RATE = "rate"  # least-squares slope over window_ns > limit [unit/s]
    DEVIATION = "deviation"  # |value - reference tag| > limit
    EQUALS = "equals"  # value == limit (discrete)
    DIFFERS = "differs"  # value != limit (discrete)
    MISMATCH = "mismatch"  # feedback of a unit is not what it was told, for longer than its travel time
    BAD = "bad"  # quality of the tag is bad, whatever the cause
    STALE = "stale"  # bad because it was not renewed in time
    FROZEN = "frozen"  # bad because its raw code stands still
    OUT_OF_SPAN = "out of span"  # bad because it lies beyond the span of its instrument
    DIAGNOSTIC = "diagnostic"  # bad because the instrument itself says so
    DISCREPANCY = "discrepancy"  # |value - partner| > limit; ``reference`` is the partner, a second instrument
    LINK = "link"  # device named in ``tag`` not online
    POWER_CYCLED = "power cycled"  # device named in ``tag`` restarted or changed its identity
    FAULT = "fault"  # the daemon's own fault named in ``tag`` (scan late, conduct error, journal, suspended)


@dataclass(frozen=True, slots=True)
class Condition:
    """One comparison. Once true it stays true until the value is back by ``deadband``.

    ``settling_ns`` (DEVIATION only): not counted for this long after the reference moved. ``window_ns`` is for RATE; a
    negative RATE limit means falling faster than that.
    """

    kind: ConditionKind
    tag: str
    limit: float = 0.0
    deadband: float = 0.0
    reference: str = ""
    window_ns: int = 0
    settling_ns: int = 0


class OnBad(StrEnum):
    """Policy for a bad channel (reference table ``voting``): T counts it as a vote to trip, N leaves it out."""

    TRIP = "trip"
    IGNORE = "ignore"


class Armed(StrEnum):
    """When an interlock counts. Absolute limits are armed always; process rules only while something moves."""

    ALWAYS = "always"
    RUNNING = "running"


@dataclass(frozen=True, slots=True)
class Interlock:
    """``votes`` of the ``causes`` for ``on_delay_ns`` trip it; it latches and orders ``stop``.

    ``consequence`` says what it prevents, ``response`` what the person should do, ``basis`` where the limit comes from.
    ``rating`` (house unit of the causes, 0 = none) is the weakest part that it protects. ``witnesses`` compare the
    channels with each other; a channel that disagrees with all others for ``discord_ns`` counts as bad. For
    ``startup_ns`` after the first movement since a reset its limits do not count yet; bad channels do.
    ``proof_interval_s`` is the time between two proof tests (0: no one asks for them).
    """

    id: str
    title: str
    causes: tuple[Condition, ...]
    stop: Stop
    votes: int = 1
    on_bad: OnBad = OnBad.TRIP
    on_delay_ns: int = 0
    clear_delay_ns: int = 1_000_000_000
    armed: Armed = Armed.ALWAYS
    consequence: str = ""
    response: str = ""
    basis: str = ""
    rating: float = 0.0
    built_in: bool = False
    witnesses: tuple[Condition, ...] = ()
    discord_ns: int = 0
    startup_ns: int = 0
    proof_interval_s: float = 0.0

    @property
    def architecture(self) -> str:
        """Voting in the usual notation, e.g. ``1oo2``."""
        return f"{self.votes}oo{len(self.causes)}"


class Priority(IntEnum):
    """1 is the most urgent; see safety notes in DEVELOPERS.md for what each means."""

    HIGHEST = 1
    HIGH = 2
    MEDIUM = 3
    LOW = 4


@dataclass(frozen=True, slots=True)
class Alarm:
    """A condition that needs a person. An alarm without ``action`` is an event and is refused by the loader.

    ``suppress`` hides it by design as long as it holds; ``realarm_ns`` repeats it while it stands (0: never);
    ``shelve_max_ns`` is the longest that a person may shelve it, in all.
    """

    id: str
    title: str
    condition: Condition
    priority: Priority
    action: str
    cause: str = ""
    consequence: str = ""
    on_delay_ns: int = 0
    off_delay_ns: int = 0
    latching: bool = False
    needs_acknowledge: bool = True
    hold: bool = False
    suppress: Condition | None = None
    realarm_ns: int = 0
    shelve_max_ns: int = 8 * 3600 * 1_000_000_000

    @property
    def shelvable(self) -> bool:
        """False for an alarm that tells of a trip or of lost protection."""
        return self.priority > Priority.HIGHEST
