"""What a fault may lead to: which stops answer it, which are too much, and what to fit when nobody sees it.

The answers per hazard are the common practice of laboratory flow rigs (no published source): pressure, leaks and pump
faults end in a cut, for liquid must not move; lost heat or temperature in a quench, for a hot bed needs solvent; what
spoils data in a hold at most, and so does a block while the pumps rest. Where two answers are usual, both stand. "none"
is right where the first answer is a word to a person. A fault whose answer is missing is *not seen*: no failure of what
is fitted, but told, with what to add.
"""

from __future__ import annotations

from dataclasses import dataclass

NONE, HOLD, QUENCH, CUT = "none", "hold", "quench", "cut"
STRENGTH = (NONE, HOLD, QUENCH, CUT)


@dataclass(frozen=True, slots=True)
class Expected:
    """``stops`` that answer the fault; ``measures`` by which it is seen; ``add`` what would show it.

    ``still``: a hold answers it only if no pump delivers in it, as after a leak test that failed.
    """

    stops: frozenset[str]
    measures: frozenset[str]
    add: str
    still: bool = False


def _row(stops: str, measures: str, add: str, *, still: bool = False) -> Expected:
    return Expected(frozenset(stops.split()), frozenset(measures.split()), add, still)


HAZARDS: dict[str, Expected] = {
    "H1": _row("none hold cut", "pressure", "a pressure sensor before the part, and a limit on its resistance"),
    "H2": _row("hold cut", "pressure", "a pressure sensor before the block, with a high trip"),
    "H3": _row("hold cut", "pressure", "pressure sensors before and after the bed, voting 1oo2"),
    "H4": _row("none cut", "pressure", "a pressure sensor in every section that valves can shut"),
    "H5": _row("hold cut", "pressure volume leak", "a leak tray, or a balance under the flask", still=True),
    "H6": _row("hold cut", "pressure leak", "a low trip on pressure while the pumps run, a leak tray", still=True),
    "H7": _row("none hold", "pressure fraction", "a bubble sensor at the pump's outlet"),
    "H8": _row("quench cut", "pressure flow state volume", "a flow meter after the pump"),
    "H10": _row("hold quench cut", "pressure flow volume fraction", "a flow meter after the pump, a bubble sensor"),
    "H11": _row("hold quench cut", "pressure volume fraction", "a balance under the bottle, or a bubble sensor"),
    "H12": _row("cut", "position pressure", "position feedback from the valve itself"),
    "H13": _row("none hold", "fraction", "the in-line detector watched in solvent steps"),
    "H14": _row("quench cut", "position fraction", "the in-line detector watched in solvent steps"),
    "H15": _row("quench", "temperature state", "a temperature sensor in the jacket that is not the bath's own"),
    "H16": _row("quench", "temperature", "a limit on the difference of bath and set-point"),
    "H17": _row("quench cut", "temperature state", "the set-point read back"),
    "H18": _row("quench cut", "temperature pressure", "a temperature sensor in the hottest part of the bed"),
    "H19": _row("hold quench cut", "pressure temperature", "a second sensor"),
    "H20": _row("none quench", "temperature", "a second temperature sensor and a limit on their difference"),
    "H21": _row("none quench", "temperature", "a second temperature sensor and a limit on their difference"),
    "H22": _row("none quench cut", "temperature pressure", "a second sensor and a limit on their difference"),
    "H23": _row("hold quench cut", "pressure temperature fraction", "a second sensor of another make"),
    "H24": _row(
        "none quench cut", "pressure temperature fraction volume", "a zero check at each start, a second sensor"
    ),
    "H25": _row("none quench cut", "state", "the link's error rate told as an alarm"),
    "H32": _row("cut", "state", "an uninterruptible supply"),
    "H33": _row("cut", "state", "an uninterruptible supply"),
    "H35": _row("quench cut", "volume level leak", "a level switch at the rim of the flask"),
    "H36": _row("hold cut", "pressure", "a limit on the slow rise of the pressure after the bed"),
    "H37": _row("cut", "pressure", "a pressure sensor after the bed"),
    "H38": _row("quench cut", "temperature pressure", "a temperature sensor in the hottest part of the bed"),
    "H39": _row("none hold quench", "fraction temperature", "a low limit on conversion"),
    "H40": _row("none hold cut", "state", "nothing: the refusal itself is told"),
    "H41": _row("none quench cut", "pressure temperature", "a known pressure applied at commissioning"),
    "H42": _row("none hold quench cut", "state", "nothing: the read-back tells"),
}
"""By hazard number of the fault kinds (``rigd faults``)."""
UNKNOWN = _row("none", "", "nobody has thought about this fault yet")


def expected(hazards: tuple[str, ...]) -> Expected:
    """The union over the hazards of a fault: one that stands for several may be answered as any of them."""
    rows = [HAZARDS[name] for name in hazards if name in HAZARDS] or [UNKNOWN]
    stops = frozenset(stop for row in rows for stop in row.stops)
    measures = frozenset(measure for row in rows for measure in row.measures)
    return Expected(stops, measures, rows[0].add, any(row.still for row in rows))
