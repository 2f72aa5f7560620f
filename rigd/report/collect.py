"""Puts a run together from its journal: traces, phases, points, what was used."""

from __future__ import annotations

from bisect import bisect_left
from collections.abc import Sequence
from pathlib import Path

import numpy as np

from rigd.adapters.alert_log import attempts_of
from rigd.adapters.journal_reader import JournalReader, Series, TagInfo
from rigd.model.errors import JournalError
from rigd.model.events import Event, EventKind
from rigd.model.recipe import Recipe
from rigd.model.rig import RigDefinition
from rigd.model.samples import Quality
from rigd.report.data import CHAIN_HEAD, PhaseSpan, RunData, Trace
from rigd.report.ending import ending
from rigd.report.points import point_rows
from rigd.report.usage import used_mL
from rigd.report.words import simulated


def read_run(folder: Path, rig: RigDefinition | None = None, recipe: Recipe | None = None) -> RunData:
    """Read the journal in ``folder``. ``rig`` and ``recipe`` are those the run was made with, where they can still be
    read. Raises ``JournalError``."""
    with JournalReader(folder) as journal:
        meta, clock, events = dict(journal.meta), journal.clock(), tuple(journal.events())
        if head := journal.head():
            meta[CHAIN_HEAD] = head
        traces = {tag: _trace(info, journal.series(tag)) for tag, info in journal.tags.items()}
        ages_ms = journal.ages_ms()
    end, end_s = ending(folder, meta, events), clock[-1][0] / 1e9 if clock else 0.0
    phases = phase_spans(events, end_s)
    return RunData(
        id=meta.get("run", folder.name),
        folder=str(folder),
        title=rig.title if rig else meta.get("rig", ""),
        recipe_title=recipe.title if recipe else meta.get("recipe", ""),
        simulated=simulated(meta),
        pace=_pace(folder, meta.get("pace", "1") or "1"),
        outcome=end.outcome,
        outcome_text=end.text,
        started_utc=clock[0][1] if clock else "",
        ended_utc=clock[-1][1] if clock else "",
        duration_s=end_s,
        traces=traces,
        phases=phases,
        points=point_rows(events, traces, rig, recipe),
        events=events,
        used_mL=used_mL(rig, traces) if rig else {},
        facts=meta,
        ages_ms=ages_ms,
        walls=_walls(clock, events),
        alerts=attempts_of(folder),
        rig=rig,
        recipe=recipe,
    )


def _walls(clock: Sequence[tuple[int, str]], events: Sequence[Event]) -> dict[int, str]:
    """UTC of the scan in which each change of an alarm was found."""
    times = [now_ns for now_ns, _ in clock]
    moments = {event.t_ns for event in events if event.kind is EventKind.ALARM}
    return {t_ns: clock[bisect_left(times, t_ns)][1] for t_ns in moments if times and t_ns <= times[-1]}


def _pace(folder: Path, told: str) -> float:
    try:
        return float(told)
    except ValueError as error:
        raise JournalError(f"{folder / 'run.sqlite'} is damaged: its pace is {told!r}") from error


def phase_spans(events: Sequence[Event], end_s: float) -> tuple[PhaseSpan, ...]:
    """Spans between PHASE events; the last one lasts until ``end_s``."""
    starts = [event for event in events if event.kind is EventKind.PHASE]
    ends = [*(event.t_ns / 1e9 for event in starts[1:]), end_s][: len(starts)]
    return tuple(
        PhaseSpan(
            event.subject,
            str(event.fields.get("label", "") or event.subject),
            str(event.fields.get("point", "")),
            event.t_ns / 1e9,
            end,
        )
        for event, end in zip(starts, ends, strict=True)
    )


def _trace(info: TagInfo, series: Series) -> Trace:
    value = np.asarray(series.values, dtype=np.float64)
    if value.size:
        value = np.where(np.asarray(series.quality) == int(Quality.BAD), np.nan, value)
    t_s = np.asarray(series.t_ns, dtype=np.float64) / 1e9
    return Trace(info.id, info.title, info.measures, info.unit, t_s, value)
