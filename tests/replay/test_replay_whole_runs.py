"""Whole sweeps decided again: a rehearsal to its end, and what other limits would have done at which record."""

from __future__ import annotations

from functools import cache
from pathlib import Path

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
