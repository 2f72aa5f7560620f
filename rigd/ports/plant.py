"""A rig that is not there: how shells and servers reach the simulated one, without knowing physics."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import Protocol, runtime_checkable

from rigd.model.orders import Action
from rigd.model.rig import PropertySet, RigDefinition
from rigd.model.samples import Reading, Spectrum


@dataclass(frozen=True, slots=True)
class FaultSpec:
    """One fault to inject: a kind from ``fault_kinds``, what it hits, when [s of process time], how long, how much."""

    kind: str
    target: str
    onset_s: float = 0.0
    duration_s: float = float("inf")
    magnitude: float = 1.0


@dataclass(frozen=True, slots=True)
class FaultKind:
    """A kind of fault: what ``target`` and ``magnitude`` mean, and which signals it moves."""

    kind: str
    title: str
    target: str
    magnitude: str
    signals: str
    hazards: tuple[str, ...] = ()


class Plant(Protocol):
    """The simulated rig in its own time, which starts at 0 ns and only moves by ``advance``."""

    def advance(self, to_ns: int) -> None:
        """Move the physics to ``to_ns``; a time in the past is refused with ``ValueError``."""

    def tell(self, unit: str, action: Action, value: float) -> str:
        """Give a command to a unit at the present time; returns "" or the device's refusal."""

    def read(self, device: str, channels: Sequence[str]) -> Sequence[Reading]:
        """What the instruments of this device would show now, noise and lag included."""

    def spectrum(self, device: str) -> Spectrum:
        """The last finished spectrum of a cell's device."""

    def inject(self, fault: FaultSpec) -> None:
        """Add a fault; onset is in plant time. ``ConfigError`` for an unknown kind or target."""

    def clear(self, kind: str, target: str) -> None:
        """End all faults of this kind on this target now."""

    def truth(self) -> Mapping[str, float]:
        """True state for checkers: "pressure:<part>" [bar], "temperature:<part>" [degC], "flow:<line>" [mL/min],
        "volume:<vessel>" [mL], "conversion:<part>", "level:<pump>",
        "delivering:<pump>" [mL/min], "peak-pressure:<part>" [bar since the start]."""


NO_ANSWER = "no answer"
"""Fault word of every reading of a device that does not answer, and its reason to refuse a command."""


@runtime_checkable
class PowerAware(Protocol):
    """A plant whose units can lose their power."""

    def restarts(self) -> Sequence[str]:
        """Devices that lost power and came back since this was last asked."""


def _no_targets(rig: RigDefinition, kind: str) -> Sequence[str]:
    return ()


@dataclass(frozen=True, slots=True)
class PlantMaker:
    """What the entry point group ``rigd.plants`` must resolve to. ``make(rig, seed)``; ``fault_targets(rig, kind)``."""

    name: str
    make: Callable[[RigDefinition, int], Plant]
    fault_kinds: Callable[[], Sequence[FaultKind]]
    fault_targets: Callable[[RigDefinition, str], Sequence[str]] = _no_targets


@dataclass(frozen=True, slots=True)
class PropertyLibrary:
    """What the entry point group ``rigd.properties`` must resolve to: the liquids' properties of a rig, with sources.

    ``sets(rig)`` raises ``ConfigError`` for a name that nobody knows. Importing it must cost little.
    """

    name: str
    sets: Callable[[RigDefinition], Sequence[PropertySet]]


@dataclass(frozen=True, slots=True)
class SimulatorOptions:
    """How to serve a plant: ``transport`` is "pty" or "tcp"; ``folder`` is where the meeting file is written.

    The server writes ``<folder>/ports.json``: {"rig", "pid", "pace", "ports": {link id: port or URL}}, after all
    ports are open, and removes it at the end. It listens for control lines (faults) on ``<folder>/sim.sock``.
    """

    folder: str
    pace: float = 1.0
    transport: str = "pty"
    seed: int = 1
    faults: tuple[FaultSpec, ...] = ()
    quiet: bool = False


class EmulatedLine(Protocol):
    """One link with its emulated devices, without a port: bytes in, bytes and their delays out.

    ``now_s`` is process time and never falls; the plant must have been advanced to it. Delays are wall seconds.
    """

    def feed(self, data: bytes, now_s: float) -> Sequence[tuple[float, bytes]]:
        """Take any bytes from the master; return what the devices send back, and when."""

    def tick(self, now_s: float) -> Sequence[tuple[float, bytes]]:
        """Let time pass (time-outs, restarts): to be called at least every 50 ms of wall time."""

    def inject(self, fault: FaultSpec) -> None:
        """Add a fault of the line or of a device on it. ``ConfigError`` for an unknown kind or target."""

    def clear(self, kind: str, target: str) -> None:
        """End all faults of this kind on this target now."""


def _no_lines(rig: RigDefinition, plant: Plant, pace: float, seed: int) -> Mapping[str, EmulatedLine]:
    return {}


@dataclass(frozen=True, slots=True)
class SimulatorMaker:
    """What the entry point group ``rigd.simulators`` must resolve to.

    ``serve`` runs until stopped by a signal; it returns the exit code and says on stderr why when it is not 0.
    ``lines`` gives the emulated lines by link id over a plant, for a shell that brings its own ports and time.
    ``fault_kinds`` are the plant's kinds and those of lines and devices, which only exist where there are bytes.
    """

    name: str
    serve: Callable[[RigDefinition, SimulatorOptions], int]
    lines: Callable[[RigDefinition, Plant, float, int], Mapping[str, EmulatedLine]] = _no_lines
    fault_kinds: Callable[[], Sequence[FaultKind]] = tuple
