"""What another rig file would have done with the same data."""

from __future__ import annotations

from pathlib import Path

import pytest
from fakes.recorded import BLOCK, CONFIGS, RIG, recorded

from rigd.adapters.journal_reader import JournalReader
from rigd.model.errors import ConfigError, RigError
from rigd.model.events import EventKind
from rigd.runtime.what_if import Change, what_if

LIMITS = 'trip_when = [{ tag = "PT-1", above = "8 bar" }, { tag = "PT-2", above = "8 bar" }]'


def rig_with(folder: Path, *changes: tuple[str, str]) -> Path:
    """The example rig with changed words, each of which must be there."""
    text = RIG.read_text().replace("../chemistry", str(CONFIGS / "chemistry"))
    for old, new in changes:
        assert old in text
        text = text.replace(old, new)
    path = folder / "other.toml"
    path.write_text(text)
    return path


def limit(bar: str) -> tuple[str, str]:
    return LIMITS, LIMITS.replace("8 bar", bar)


def one(changes: tuple[Change, ...], kind: EventKind, subject: str) -> Change:
    (found,) = [change for change in changes if (change.kind, change.subject) == (kind, subject)]
    return found


def first_above(run: Path, tag: str, bar: float) -> int:
    with JournalReader(run) as journal:
        series = journal.series(tag)
    return next(t_ns for t_ns, value in zip(series.t_ns, series.values, strict=True) if value > bar)


def test_the_same_rig_changes_nothing(tmp_path):
    found = what_if(recorded(BLOCK), rig_with(tmp_path))
    assert found.changes == ()
    assert found.parted_ns is None
    assert found.scans > 100


def test_a_lower_limit_trips_earlier_by_what_the_curve_says(tmp_path):
    run = recorded(BLOCK)
    found = what_if(run, rig_with(tmp_path, limit("6 bar")))
    trip = one(found.changes, EventKind.TRIP, "PRESSURE-HIGH")
    assert trip.recorded_ns is not None
    assert trip.would_ns is not None
    delay_ns = 200_000_000  # of this interlock, in the rig file
    crossed_ns = min(first_above(run, tag, 6.0) for tag in ("PT-1", "PT-2"))
    assert crossed_ns + delay_ns <= trip.would_ns <= crossed_ns + delay_ns + 300_000_000
    assert trip.earlier_s == pytest.approx((trip.recorded_ns - trip.would_ns) / 1e9)
    assert trip.earlier_s > 0
    assert found.parted_ns == trip.would_ns
    assert "limit of 6 bar" in trip.text


def test_a_longer_delay_trips_later_by_that(tmp_path):
    found = what_if(recorded(BLOCK), rig_with(tmp_path, ('on_bad = "trip"\ndelay = "200 ms"', 'delay = "1200 ms"')))
    trips = [change for change in found.changes if change.kind is EventKind.TRIP and change.subject == "PRESSURE-HIGH"]
    assert trips, "the recorded trip is gone or moved"
    assert found.parted_ns is not None


def test_a_limit_that_was_never_reached_takes_the_trip_away(tmp_path):
    found = what_if(recorded(BLOCK), rig_with(tmp_path, limit("15 bar")))
    trip = one(found.changes, EventKind.TRIP, "PRESSURE-HIGH")
    assert trip.would_ns is None
    assert trip.earlier_s is None
    assert found.parted_ns == trip.recorded_ns


def test_a_quiet_run_would_have_tripped_with_a_limit_below_its_pressure(tmp_path):
    """Also below the leak test of the recipe that was run: what would be refused before a run can be asked after it."""
    found = what_if(recorded(), rig_with(tmp_path, limit("2 bar")))
    trip = one(found.changes, EventKind.TRIP, "PRESSURE-HIGH")
    assert trip.recorded_ns is None
    assert trip.would_ns is not None
    assert one(found.changes, EventKind.STOP, "cut").recorded_ns is None


def test_after_the_parting_only_measured_limits_are_told(tmp_path):
    """No trip of a link, a stall or a position that the recorded rig, which never stopped, would seem to show."""
    found = what_if(recorded(), rig_with(tmp_path, limit("2 bar")))
    assert found.parted_ns is not None
    late = [change for change in found.changes if (change.would_ns or 0) > found.parted_ns]
    assert all(change.kind in (EventKind.TRIP, EventKind.ALARM) for change in late)
    assert not any(change.subject.startswith(("LINK-", "STALL-", "MISMATCH-", "STOP-")) for change in late)


def test_another_rig_is_refused_with_what_is_missing(tmp_path):
    for name in ("one-pump.toml", "three-pump-two-columns.toml"):
        with pytest.raises(RigError, match=r"the other rig has"):
            what_if(recorded(), CONFIGS / "rigs" / name)


def test_a_broken_rig_file_is_refused_with_its_problems(tmp_path):
    path = rig_with(tmp_path, ('above = "75 degC"', 'above = "75 bar"'))
    with pytest.raises(ConfigError) as caught:
        what_if(recorded(), path)
    assert caught.value.problems[0].file == str(path)
