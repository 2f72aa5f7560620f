"""Do the lines join what exists, and does every part have its lines?"""

from __future__ import annotations

from collections.abc import Mapping

from rigd.config.checks.context import RigContext
from rigd.config.findings import listed, nearest
from rigd.config.lines import Path
from rigd.model.rig import End, Line, VesselRole

_THROUGH = ("pumps", "columns", "cells", "regulators")
"""Parts with exactly one line in and one line out."""
_DRY = ("chillers", "reliefs")
"""Parts that no line joins: a relief valve says itself where it stands."""


def check_lines(context: RigContext) -> None:
    """Ends, directions and counts of lines."""
    parts = context.parts()
    for line in context.rig.lines:
        for end, key in ((line.start, "from"), (line.end, "to")):
            _end(context, parts, end, context.at("lines", line.id, key))
        if line.start.part == line.end.part:
            message = f"both ends of {line.id} are at {line.start.part!r}"
            context.found.error("line-to-itself", context.at("lines", line.id, "to"), message, "name two parts")
        _vessel_direction(context, line)
    if context.whole("lines"):  # a line with a finding of its own is missing here, and is not missed
        for section in _THROUGH:
            for part in getattr(context.file, section):
                _count(context, section, part.id)
        for tee in context.rig.tees:
            _tee(context, tee.id)
        for vessel in context.rig.vessels:
            _vessel(context, vessel.id)
        for valve in context.rig.valves:
            _valve(context, valve.id)


def _end(context: RigContext, parts: Mapping[str, str], end: End, place: Path) -> None:
    section = parts.get(end.part)
    if section is None or section in _DRY:
        known = [name for name, kind in parts.items() if kind not in _DRY]
        message = f"no part {end.part!r} that a line can join{nearest(end.part, known)}"
        context.found.error("line-end-unknown", place, message, f"known parts: {listed(sorted(known))}")
    elif end.port and section != "valves":
        message = f"{end.part} is not a valve and has no position {end.port!r}"
        context.found.error("port-not-allowed", place, message, f"write {end.part!r} alone")
    elif end.port:
        valve = next((valve for valve in context.rig.valves if valve.id == end.part), None)
        if valve is not None and end.port not in valve.positions:
            message = f"valve {valve.id} has no position {end.port!r}{nearest(end.port, valve.positions)}"
            remedy = f"its positions: {listed(valve.positions)}; {valve.id!r} alone is its common port"
            context.found.error("valve-position-unknown", place, message, remedy)


def _vessel_direction(context: RigContext, line: Line) -> None:
    roles = {vessel.id: vessel.role for vessel in context.rig.vessels}
    if roles.get(line.end.part) is VesselRole.SUPPLY:
        place = context.at("lines", line.id, "to")
        message = f"{line.id} leads into {line.end.part}, which is a supply"
        context.found.error("line-direction", place, message, "lines run with the flow: swap 'from' and 'to'")
    if roles.get(line.start.part, VesselRole.SUPPLY) is not VesselRole.SUPPLY:
        place = context.at("lines", line.id, "from")
        message = f"{line.id} comes out of {line.start.part}, which is not a supply"
        context.found.error("line-direction", place, message, "lines run with the flow: swap 'from' and 'to'")


def _into(context: RigContext, part: str, port: str | None = None) -> list[Line]:
    return [line for line in context.rig.lines if line.end.part == part and port in (None, line.end.port)]


def _out_of(context: RigContext, part: str, port: str | None = None) -> list[Line]:
    return [line for line in context.rig.lines if line.start.part == part and port in (None, line.start.port)]


def _count(context: RigContext, section: str, part: str) -> None:
    for lines, way, code in (
        (_into(context, part), "leads to", "part-without-inlet"),
        (_out_of(context, part), "leaves", "part-without-outlet"),
    ):
        place = context.at(section, part, "id")
        if not lines:
            context.found.error(code, place, f"no line {way} {part}", f"add a [[lines]] table that {way} {part}")
        elif len(lines) > 1:
            names = listed(line.id for line in lines)
            remedy = "one line only: join or divide the flow at a tee or valve"
            context.found.error("lines-too-many", place, f"{len(lines)} lines ({names}) {way} {part}", remedy)


def _tee(context: RigContext, tee: str) -> None:
    place = context.at("tees", tee, "id")
    leaving = _out_of(context, tee)
    if not _into(context, tee):
        context.found.error("part-without-inlet", place, f"no line leads to {tee}", "add a [[lines]] table to it")
    if not leaving:
        context.found.error("part-without-outlet", place, f"no line leaves {tee}", "add a [[lines]] table from it")
    if len(leaving) > 1:
        message = f"{listed(line.id for line in leaving)} leave {tee}: how the flow divides there is not known"
        context.found.error("lines-too-many", place, message, "one line out of a tee; choose the way by a valve")


def _vessel(context: RigContext, vessel: str) -> None:
    if not _into(context, vessel) and not _out_of(context, vessel):
        message = f"no line joins {vessel}"
        remedy = "add the line, or remove the vessel"
        context.found.error("part-without-line", context.at("vessels", vessel, "id"), message, remedy)


def _valve(context: RigContext, valve: str) -> None:
    """One way: all positions lead in and the common port out (a feed valve), or the other way round."""
    place = context.at("valves", valve, "id")
    commons = (_into(context, valve, ""), _out_of(context, valve, ""))
    ports = (
        [line for line in _into(context, valve) if line.end.port],
        [line for line in _out_of(context, valve) if line.start.port],
    )
    if not commons[0] and not commons[1]:
        message = f"no line joins the common port of {valve}"
        context.found.error(
            "part-without-line", place, message, f"write {valve!r} without a position at that line's end"
        )
    if not ports[0] and not ports[1]:
        message = f"no line joins a position of {valve}"
        context.found.error(
            "part-without-line", place, message, f"write for example '{valve}.position' at a line's end"
        )
    if (ports[0] and ports[1]) or (commons[0] and ports[0]) or (commons[1] and ports[1]):
        message = f"the lines of {valve} do not run one way through it"
        remedy = "all positions lead in and the common port out, or the common port in and all positions out"
        context.found.error("valve-direction", place, message, remedy)
    _valve_ports(context, valve, place)


def _valve_ports(context: RigContext, valve: str, place: Path) -> None:
    leading = [(line.end.port, line.id) for line in _into(context, valve)]
    leaving = [(line.start.port, line.id) for line in _out_of(context, valve)]
    for joined in (leading, leaving):
        for port in sorted({port for port, _ in joined}):
            here = [name for there, name in joined if there == port]
            if len(here) > 1:
                name = f"position {port!r}" if port else "the common port"
                message = f"{listed(here)} join at {name} of {valve}"
                context.found.error("lines-too-many", place, message, "one line at each port")
