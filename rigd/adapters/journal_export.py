"""A run as one wide table: comma-separated values that a spreadsheet opens, units in the header."""

from __future__ import annotations

import csv
import math
from bisect import bisect_right
from pathlib import Path

from rigd.adapters.journal_reader import JournalReader, Series, TagInfo
from rigd.model.events import EventKind
from rigd.model.samples import Quality

SPREADSHEET_ROWS = 1_048_576
"""Most rows that common spreadsheets hold on one sheet."""


def export_csv(run: Path, out: Path, period_s: float = 1.0) -> int:
    """Write ``out`` and return its number of data rows.

    One row per ``period_s`` of process time (longer when the run would not fit on a sheet): the last sample at that
    time, empty when it was bad or not there yet. States and positions are written as words.
    """
    with JournalReader(run) as journal:
        clock = journal.clock()
        columns = [(info, journal.series(tag)) for tag, info in journal.tags.items()]
        columns = [(info, series) for info, series in columns if series.t_ns]
        phases = _Steps([(event.t_ns, event.subject) for event in journal.events(EventKind.PHASE)])
        points = _Steps([(event.t_ns, str(event.fields.get("point", ""))) for event in journal.events(EventKind.PHASE)])
        simulated = journal.meta.get("simulated", "")
    end_ns = clock[-1][0] if clock else 0
    period_ns = max(round(period_s * 1e9), -(-end_ns // (SPREADSHEET_ROWS - 2)))
    utc = _Steps(clock)
    count = 0
    with out.open("w", newline="", encoding="utf-8") as file:
        writer = csv.writer(file)
        writer.writerow(["time [s]", "UTC", "simulated", "phase", "point", *(_header(info) for info, _ in columns)])
        for now_ns in range(0, end_ns + 1, period_ns):
            head = [f"{now_ns / 1e9:.3f}", utc.at(now_ns), simulated, phases.at(now_ns), points.at(now_ns)]
            writer.writerow([*head, *(_cell(info, series, now_ns) for info, series in columns)])
            count += 1
    return count


def events_csv(run: Path, out: Path) -> int:
    """Write all events, one a row; returns their number."""
    with JournalReader(run) as journal, out.open("w", newline="", encoding="utf-8") as file:
        writer = csv.writer(file)
        writer.writerow(["time [s]", "kind", "subject", "text", "fields"])
        count = 0
        for event in journal.events():
            fields = "; ".join(f"{key}={value}" for key, value in event.fields.items())
            writer.writerow([f"{event.t_ns / 1e9:.3f}", event.kind.value, event.subject, event.text, fields])
            count += 1
    return count


class _Steps:
    """What was in force at a time: the last entry at or before it."""

    def __init__(self, entries: list[tuple[int, str]]) -> None:
        self._t_ns = [t_ns for t_ns, _ in entries]
        self._texts = [text for _, text in entries]

    def at(self, now_ns: int) -> str:
        index = bisect_right(self._t_ns, now_ns)
        return self._texts[index - 1] if index else ""


def _header(info: TagInfo) -> str:
    return f"{info.id} [{info.unit}]" if info.unit and not info.labels else info.id


def _cell(info: TagInfo, series: Series, now_ns: int) -> str:
    index = bisect_right(series.t_ns, now_ns) - 1
    if index < 0 or series.quality[index] == Quality.BAD or math.isnan(series.values[index]):
        return ""
    value = series.values[index]
    if info.labels and 0 <= value < len(info.labels):
        return info.labels[int(value)]
    return f"{value:.6g}"
