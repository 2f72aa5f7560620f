"""Cause and effect of a rig as a matrix: which rule moves which actuator, how, and when; and what is missing.

Rows are causes, columns effects, cells the relation, as IEC 62881:2018 asks of such a matrix (known from its abstract;
no conformity claimed); the legend is our own. Rows of the rules that every rig has are gathered by what they do.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

from rigd.model.orders import Stop
from rigd.model.protection import Alarm, ConditionKind, Interlock
from rigd.model.rig import LiquidRole, RigDefinition
from rigd.report.cause_words import condition_words

AT_ONCE, DELAYED, FLUSHES, REST, SAFE, WAITS, TELLS = "X", "D", "F", "R", "S", "H", "N"
LEGEND = {
    AT_ONCE: "stops at once and stays stopped until a reset",
    DELAYED: "the same, after the delay of its row",
    FLUSHES: "flushes with solvent, then stops",
    REST: "goes to its rest position",
    SAFE: "goes on at its safe temperature",
    WAITS: "waits safely, ready to go on",
    TELLS: "a person is told, with this priority (1 the most urgent)",
}
"""What the letters of a cell mean; an empty cell means that the cause does nothing there."""


@dataclass(frozen=True, slots=True)
class Row:
    """One cause, or several of one kind: the rule, what it sees, how it votes, its delay [s], and what is done where.

    ``cells`` is by column.
    """

    id: str
    causes: tuple[str, ...]
    vote: str
    delay_s: float
    cells: dict[str, str]
    stop: str

    @property
    def only_tells(self) -> bool:
        """True when nothing moves or waits."""
        return set(self.cells) == {"told"}


@dataclass(frozen=True, slots=True)
class Matrix:
    """The whole matrix. ``columns`` maps each effect to what it is."""

    columns: dict[str, str]
    rows: tuple[Row, ...]


def matrix(rig: RigDefinition) -> Matrix:
    """The matrix of a rig: its own interlocks one by one, the built-in ones gathered, then its alarms."""
    columns = {pump.id: "pump" for pump in rig.pumps} | {valve.id: "valve" for valve in rig.valves if valve.device}
    columns |= {chiller.id: "bath" for chiller in rig.chillers} | {"sequence": "the recipe", "told": "a person"}
    own = [_interlock_row(rig, lock) for lock in rig.interlocks if not lock.built_in]
    alarms = [_alarm_row(rig, alarm) for alarm in rig.alarms]
    return Matrix(columns, (*own, *_gathered(rig), *alarms))


def _interlock_row(rig: RigDefinition, lock: Interlock) -> Row:
    causes = tuple(
        lock.title if cause.kind is ConditionKind.FAULT else condition_words(rig, cause) for cause in lock.causes
    )
    return Row(lock.id, causes, lock.architecture, lock.on_delay_ns / 1e9, _cells(rig, lock), lock.stop.name.lower())


def _cells(rig: RigDefinition, lock: Interlock) -> dict[str, str]:
    """What a stop does to each column."""
    if lock.stop is Stop.HOLD:
        return {"sequence": WAITS, "told": f"{TELLS}1"}
    now = DELAYED if lock.on_delay_ns else AT_ONCE
    cells = {"sequence": now, "told": f"{TELLS}1"}
    flushing = _flushing(rig) if lock.stop is Stop.QUENCH else frozenset()
    for pump in rig.pumps:
        cells[pump.id] = FLUSHES if pump.id in flushing else now
    for valve in rig.valves:
        if valve.device:
            cells[valve.id] = REST
    for chiller in rig.chillers:
        cells[chiller.id] = SAFE
    return cells


def _flushing(rig: RigDefinition) -> frozenset[str]:
    """Pumps that can deliver solvent after a stop: with two syringes and solvent at their valve's rest position."""
    solvents = {liquid.id for liquid in rig.liquids if liquid.role is LiquidRole.SOLVENT}
    vessels = {vessel.id for vessel in rig.vessels if vessel.liquid in solvents}
    rests = {valve.id: valve.rest for valve in rig.valves}
    fed = {
        line.end.part
        for line in rig.lines
        if line.start.part in vessels and rests.get(line.end.part, line.end.port) == line.end.port
    }
    behind = {line.end.part for line in rig.lines if line.start.part in fed and not line.start.port} | fed
    return frozenset(pump.id for pump in rig.pumps if pump.syringes == 2 and pump.id in behind)


def _gathered(rig: RigDefinition) -> Iterator[Row]:
    """The built-in interlocks, those of one name with one delay and one stop in one row."""
    groups: dict[tuple[str, Stop, int], list[Interlock]] = {}
    for lock in rig.interlocks:
        if lock.built_in:
            kind = lock.id if lock.id.startswith(("FAULT", "STOP", "CUT", "PERMIT")) else lock.id.partition("-")[0]
            groups.setdefault((kind, lock.stop, lock.on_delay_ns), []).append(lock)
    for (kind, _, _), locks in groups.items():
        if len(locks) == 1:
            yield _interlock_row(rig, locks[0])
            continue
        first = _interlock_row(rig, locks[0])
        names = ", ".join(lock.causes[0].tag for lock in locks)
        causes = (names + first.causes[0].removeprefix(locks[0].causes[0].tag),)
        yield Row(f"{kind}-…", causes, "each alone", first.delay_s, first.cells, first.stop)


def _alarm_row(rig: RigDefinition, alarm: Alarm) -> Row:
    cells = {"told": f"{TELLS}{int(alarm.priority)}"} | ({"sequence": WAITS} if alarm.hold else {})
    causes = (condition_words(rig, alarm.condition),)
    return Row(alarm.id, causes, "1oo1", alarm.on_delay_ns / 1e9, cells, "")
