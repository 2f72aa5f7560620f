"""The flow path as text, drawn from the lines of the rig: feeds from the left into their merge, then the trunk.

    acid-feed ━━━━ V-A ━━ PU-A 2.00 mL/min ━┓
    alcohol-feed ━ V-B ━━ PU-B 2.00 mL/min ━┻▶
    ▶━ TEE 3.41 bar ━━ COL 60.1 °C ━━ IR 37.2 % ━━ V-C ▶ flask 12.3 mL

Heavy lines carry flow, light ones stand still. A pump that joins later starts a new pair of rows.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from typing import Any

from rich.cells import cell_len
from rich.text import Text

from rigd.logic.flow_path import Feed, FlowPath, Section
from rigd.model.rig import RigDefinition, Tag
from rigd.model.samples import QualityCause

Values = Mapping[str, Mapping[str, Any]]

MOVING, STILL, PART = "bold cyan", "dim", "bold"
DIGITS = {"pressure": 2, "temperature": 1, "fraction": 1, "flow": 3, "volume": 1, "absorbance": 4}
SHOWN_AT_PARTS = ("pressure", "temperature", "fraction")


def drawing(rig: RigDefinition, path: FlowPath, values: Values, width: int) -> list[Text]:
    """Rows of at most ``width`` columns."""
    rows: list[Text] = []
    for number, section in enumerate(path.sections):
        before = path.sections[number - 1].pumps if number else ()
        joining = [feed for feed in path.feeds if feed.pump in section.pumps and feed.pump not in before]
        rows += _feeds(rig, joining, values)
        last = number == len(path.sections) - 1
        tail = _outlet(path, values) if last else []
        rows += _trunk(_labels(rig, section, values) + tail, _flowing(section, values), width)
    return rows


def quantity(entry: Mapping[str, Any] | None, measures: str = "") -> str:
    """A value with its unit, as on the screen: fractions in per cent, a question mark when uncertain, the cause when
    bad, a dash when there is none."""
    if measures == "fraction" and entry and entry.get("c") == QualityCause.NOT_A_NUMBER.value:
        return "–"  # a conversion of nothing: no reactant has come yet
    if entry is None or entry.get("q") == "bad":
        return str(entry.get("c", "")) or "bad" if entry else "–"
    if entry.get("text"):
        return str(entry["text"])
    value, unit = entry.get("v"), str(entry.get("u", ""))
    if not isinstance(value, int | float):
        return "–"
    if measures == "fraction":
        value, unit = 100 * value, "%"
    mark = "?" if entry.get("q") == "uncertain" else ""
    shown = {"degC": "°C", "1": ""}.get(unit, unit)
    return f"{value:.{DIGITS.get(measures, 3)}f} {shown}".rstrip() + mark


def _feeds(rig: RigDefinition, feeds: Iterable[Feed], values: Values) -> list[Text]:
    """One row per feed, aligned, bracketed together on the right."""
    listed = list(feeds)
    cells = [_feed_cells(rig, feed, values) for feed in listed]
    widths = [max((cell_len(row[column]) for row in cells), default=0) for column in range(3)]
    rows = []
    for index, (feed, row) in enumerate(zip(listed, cells, strict=True)):
        moving = _pump_flow(values, feed.pump) > 0
        style, bar = (MOVING, "━") if moving else (STILL, "─")
        text = Text("  ")
        for column in (0, 1):
            if widths[column]:
                text.append(row[column] + " ").append(bar * (widths[column] - cell_len(row[column]) + 2), style)
                text.append(" ")
        text.append(row[2], PART).append(" " * (widths[2] - cell_len(row[2]) + 1))
        last = index == len(listed) - 1
        text.append(f"{bar}{'━' if len(listed) == 1 else '┻' if last else '┓' if index == 0 else '┫'}", style)
        rows.append(text.append("▶" if last else "", style))
    return rows


def _feed_cells(rig: RigDefinition, feed: Feed, values: Values) -> tuple[str, str, str]:
    """Liquid drawn, valve, and pump with its flow."""
    position = str(values.get(f"{feed.valve}.position", {}).get("text", "")) if feed.valve else ""
    liquid = feed.supply.get(position, "" if feed.valve else next(iter(feed.supply.values()), ""))
    flow = quantity(values.get(f"{feed.pump}.flow"), "flow")
    return liquid or position or "?", feed.valve, f"{feed.pump} {flow}"


def _trunk(labels: list[Text], moving: bool, width: int) -> list[Text]:
    """The parts of a section in order, wrapped at ``width``."""
    style, bar = (MOVING, "━") if moving else (STILL, "─")
    rows, row = [], Text().append(f"  ▶{bar} ", style)
    first = True
    for label in labels:
        joint = "" if first else f" {bar}{bar} "
        if not first and cell_len(row.plain) + len(joint) + cell_len(label.plain) > width:
            row.append(f" {bar}{bar}", style)
            rows.append(row)
            row, joint = Text().append(f"     {bar}{bar} ", style), ""
        row.append(joint, style)
        row.append_text(label)
        first = False
    return [*rows, row]


def _labels(rig: RigDefinition, section: Section, values: Values) -> list[Text]:
    """The parts that are not plain tube, each with what is measured there."""
    lines = {line.id for line in rig.lines}
    found = []
    for segment in section.segments:
        if segment.id in lines:
            continue
        text = Text().append(segment.id, PART)
        for tag in _tags_at(rig, segment.id):
            entry = values.get(tag.id)
            style = {"bad": "bold red", "uncertain": "yellow"}.get(str((entry or {}).get("q")), "default")
            text.append(f" {quantity(entry, tag.measures)}", style)
        found.append(text)
    return found


def _tags_at(rig: RigDefinition, part: str) -> list[Tag]:
    here = [tag for tag in rig.tags if tag.at.split(".")[0] == part and tag.measures in SHOWN_AT_PARTS]
    derived = [tag for tag in rig.tags if tag.id == f"{part}.conversion" and tag not in here]
    jacketless = [tag for tag in here if not tag.at.endswith(".jacket")]
    return jacketless + derived


def _outlet(path: FlowPath, values: Values) -> list[Text]:
    if not path.outlet_valve:
        return []
    position = str(values.get(f"{path.outlet_valve}.position", {}).get("text", ""))
    outlet = path.outlets.get(position)
    text = Text().append(path.outlet_valve, PART)
    if outlet is None or not outlet.vessel:
        return [text.append(f" {position or '?'}", "yellow")]
    text.append(" ▶ ", "green" if position != "waste" else "default").append(outlet.vessel)
    if f"{outlet.vessel}.volume" in values:
        text.append(f" {quantity(values[f'{outlet.vessel}.volume'], 'volume')}")
    return [text]


def _pump_flow(values: Values, pump: str) -> float:
    value = values.get(f"{pump}.flow", {}).get("v")
    return float(value) if isinstance(value, int | float) else 0.0


def _flowing(section: Section, values: Values) -> bool:
    return any(_pump_flow(values, pump) > 0 for pump in section.pumps)
