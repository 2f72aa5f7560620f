"""A recorded run at any time: forwards, backwards and step by step, always the same picture."""

from __future__ import annotations

from collections.abc import Iterator

import pytest
from fakes.recorded import BLOCK, S, recorded

from rigd.adapters.journal_reader import JournalReader
from rigd.runtime import film as film_module
from rigd.runtime.film import Film


@pytest.fixture
def film(monkeypatch: pytest.MonkeyPatch) -> Iterator[Film]:
    monkeypatch.setattr(film_module, "KEYFRAME_SCANS", 50)
    with JournalReader(recorded(BLOCK)) as journal:
        yield Film(journal)


def test_a_time_shows_the_last_scan_at_or_before_it(film):
    frame = film.at(30 * S)
    with JournalReader(recorded(BLOCK)) as journal:
        before = [record for record in journal.scans() if record.now_ns <= 30 * S]
    assert frame is not None
    assert (frame.number, frame.now_ns) == (before[-1].number, before[-1].now_ns)
    assert frame.snapshot["t_s"] == frame.now_ns / 1e9
    values = frame.snapshot["values"]
    assert isinstance(values, dict)
    newest = [sample for record in before for sample in record.intake.samples if sample.tag == "PT-1"][-1]
    assert values["PT-1"]["v"] == pytest.approx(newest.value, rel=1e-3)


def test_back_and_forth_shows_the_same(film):
    times = [40 * S, 12 * S, 25 * S, 0, 41 * S, 40 * S, 12 * S]
    shown = {}
    for t_ns in times:
        frame = film.at(t_ns)
        assert shown.setdefault(t_ns, frame) == frame


def test_steps_go_scan_by_scan_and_stay_inside(film):
    first = film.at(0)
    assert first is not None
    assert first.number == 1
    assert film.step(-1) == first
    numbers = [film.step(1).number for _ in range(120)]
    assert numbers == list(range(2, 122))
    assert film.step(-1).number == 120
    assert film.step(-119) == first
    film.at(10**18)
    assert film.step(5).number == film.last


def test_the_trip_is_a_chapter_and_its_events_are_seen(film):
    frame = film.at(film.end_ns)
    assert frame is not None
    kinds = [event.kind.value for event in frame.events]
    assert "trip" in kinds or len(kinds) == film_module.EVENTS_KEPT
    trips = [event.t_ns for event in JournalReader(recorded(BLOCK)).events(film_module.EventKind.TRIP)]
    assert set(trips) <= set(film.chapters_ns)
