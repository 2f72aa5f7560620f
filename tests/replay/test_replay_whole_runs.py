"""Whole sweeps decided again: a rehearsal to its end, and what other limits would have done at which record."""

from __future__ import annotations

import re
from functools import cache
from itertools import takewhile
from pathlib import Path
from textwrap import dedent
from typing import Any

import pytest
from fakes.recorded import CONFIGS, RIG, recorded

from rigd.adapters.journal_reader import JournalReader, Series
from rigd.model.events import EventKind
from rigd.runtime.replay import replay
from rigd.runtime.what_if import what_if

pytestmark = [pytest.mark.slow, pytest.mark.timeout(180)]
WHOLE_S = 7200
DELAY_NS = 200_000_000
"""The on-delay of PRESSURE-HIGH in the rig file."""


@cache
def night() -> Path:
    return recorded(limit_s=WHOLE_S)


def test_a_whole_rehearsal_is_decided_again_exactly():
    found = replay(night())
    assert found.recorded.meta["outcome"] == "done"
    assert found.same
    assert found.scans > 10_000
    assert not found.notes


def first_above(series: list[Series], limit: float) -> int:
    """Time [ns] at which the first of the tags has stood above the limit for the delay (an account of its own: the
    first sample above that is followed by none below within the delay)."""
    found = []
    for one in series:
        since_ns: int | None = None
        for t_ns, value in zip(one.t_ns, one.values, strict=True):
            if value <= limit:
                since_ns = None
            elif since_ns is None:
                since_ns = t_ns
            if since_ns is not None and t_ns - since_ns >= DELAY_NS:
                found.append(since_ns + DELAY_NS)
                break
    return min(found)


def test_another_limit_trips_at_the_record_where_the_pressure_stood_above_it(tmp_path):
    with JournalReader(night()) as journal:
        series = [journal.series(tag) for tag in ("PT-1", "PT-2")]
        assert not journal.events(EventKind.TRIP)
    peak_bar = max(series[0].values)
    limit_bar = round(0.8 * peak_bar, 2)
    text = RIG.read_text().replace("../chemistry", str(CONFIGS / "chemistry"))
    other = tmp_path / "other.toml"
    other.write_text(text.replace('above = "8 bar"', f'above = "{limit_bar} bar"'))
    assert other.read_text() != text
    found = what_if(night(), other)
    trip = next(change for change in found.changes if (change.kind, change.subject) == ("trip", "PRESSURE-HIGH"))
    assert trip.recorded_ns is None
    assert trip.would_ns == pytest.approx(first_above(series, limit_bar), abs=1_000_000)
    assert found.parted_ns == trip.would_ns


def tutorial(run: Path) -> str:
    """The notebook of README.md, with the run that is there."""
    text = (CONFIGS.parent / "README.md").read_text(encoding="utf-8").split("In a notebook:\n", 1)[1]
    lines = takewhile(lambda line: not line or line.startswith("    "), text.splitlines())
    code = dedent("\n".join(lines))
    return re.sub(r'open_run\(".*?"\)', f"open_run({str(run)!r})", code)


def test_the_notebook_of_the_readme_runs_and_shows_the_points():
    *code, last = tutorial(night()).strip().splitlines()
    names: dict[str, Any] = {}
    exec("\n".join(code), names)
    shown = eval(last, names)
    assert list(shown["point"]) == [f"P0{number}" for number in range(1, 7)]
    assert shown["conversion"].is_monotonic_increasing  # the sweep goes from fast to slow
    assert shown["collected_mL"].between(0.45, 0.6).all()
    assert names["pressure"]["t_s"][0] == pytest.approx(600, abs=0.5)
    assert names["table"]["PT-1 [bar]"].max() < 8
    assert names["trips"].rows == 0
    assert names["orders"].rows > 50
