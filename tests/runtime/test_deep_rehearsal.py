"""The deep rehearsal: the live shell over emulated bytes. What it must have in common with the fast one, and how
nearly: the same phases, points and trips; times within the two's different polls.
"""

from __future__ import annotations

from collections.abc import Sequence
from itertools import pairwise
from pathlib import Path

import pytest
from fakes.recorded import BLOCK, RECIPE, RIG, S, recorded

from rigd.adapters.journal_reader import JournalReader
from rigd.app import DryRun, DrySettings, dry_run
from rigd.model.errors import ConfigError
from rigd.model.events import Event, EventKind
from rigd.ports.plant import FaultSpec
from rigd.runtime.dry import DryOptions
from rigd.runtime.replay import replay

TRIP_S = 3.0
"""A trip may differ by one poll of a slow device and the start of the run (reset and start come 2 s apart)."""
PHASE_S, SETTLE_S = 5.0, 150.0
"""A phase may take this much longer or shorter. Settling is judged on readings with noise, which fall at other times:
one window that is just not steady costs another one."""
WHOLE_SHARE = 0.05
CONVERSION = 0.01
COLLECTED_mL = 0.02


def rehearse(folder: Path | None, *faults: FaultSpec, limit_s: int, deep: bool = True) -> DryRun:
    journal = None if folder is None else folder / "run.sqlite"
    options = DryOptions(limit_ns=limit_s * S)
    return dry_run(RIG, RECIPE, DrySettings(faults=faults, journal=journal, options=options, deep=deep))


def of_kind(events: Sequence[Event], kind: EventKind) -> list[Event]:
    return [event for event in events if event.kind is kind]


@pytest.mark.timeout(120)
def test_a_block_trips_in_both_and_the_deep_run_replays(tmp_path):
    deep = rehearse(tmp_path, BLOCK, limit_s=60)
    with JournalReader(recorded(BLOCK)) as journal:
        fast = journal.events(EventKind.TRIP)
    trips = of_kind(deep.result.events, EventKind.TRIP)
    assert trips[0].subject == fast[0].subject == "PRESSURE-HIGH"
    assert trips[0].t_ns / 1e9 == pytest.approx(fast[0].t_ns / 1e9, abs=TRIP_S)
    assert deep.result.peak["PT-1"] > 8.0
    assert deep.result.exit_code == 1
    found = replay(tmp_path)
    assert found.same
    assert found.scans == deep.result.scans


@pytest.mark.timeout(120)
def test_the_same_seed_gives_the_same_digest_and_the_limit_ends_it():
    first, second = (rehearse(None, limit_s=15).result for _ in range(2))
    assert first.digest == second.digest
    assert first.outcome == "stopped"
    assert "was not over" in first.text
    assert first.end_ns == pytest.approx(15 * S, abs=S)
    assert first.scans > 100


@pytest.mark.timeout(120)
def test_a_fault_of_bytes_exists_only_where_there_are_bytes():
    silent = FaultSpec("device-silent", "sensors", onset_s=8.0)
    deep = rehearse(None, silent, limit_s=30).result
    trips = {event.subject: event.t_ns / 1e9 for event in of_kind(deep.events, EventKind.TRIP)}
    assert 8.0 < trips["PRESSURE-HIGH"] < trips["LINK-sensors"] < 12.0
    with pytest.raises(ConfigError):
        rehearse(None, silent, limit_s=30, deep=False)


@pytest.mark.slow
@pytest.mark.timeout(1500)
def test_deep_and_fast_agree_on_a_whole_sweep(tmp_path):
    deep, fast = (rehearse(tmp_path if deep else None, limit_s=7200, deep=deep).result for deep in (True, False))
    assert (deep.outcome, fast.outcome) == ("done", "done")
    assert replay(tmp_path).same
    ours, theirs = lengths_s(deep.events), lengths_s(fast.events)
    assert list(ours) == list(theirs)
    for phase, length_s in ours.items():
        assert length_s == pytest.approx(theirs[phase], abs=SETTLE_S if phase.startswith("point-") else PHASE_S), phase
    assert deep.end_ns == pytest.approx(fast.end_ns, rel=WHOLE_SHARE)
    points = [of_kind(result.events, EventKind.POINT) for result in (deep, fast)]
    assert [(e.subject, e.fields["status"]) for e in points[0]] == [(e.subject, e.fields["status"]) for e in points[1]]
    for mine, other in zip(*points, strict=True):
        for name, tolerance in (("conversion", CONVERSION), ("collected_mL", COLLECTED_mL)):
            if name in other.fields:
                assert mine.fields[name] == pytest.approx(other.fields[name], abs=tolerance)
    assert not of_kind(deep.events, EventKind.TRIP)
    assert not of_kind(fast.events, EventKind.TRIP)


def lengths_s(events: Sequence[Event]) -> dict[str, float]:
    """Length of each phase but the last, in the order they began. Steps within one are not told apart: how often a
    point is set anew by a refill hangs on when its noise let it settle."""
    phases = of_kind(events, EventKind.PHASE)
    lengths: dict[str, float] = {}
    for event, after in pairwise(phases):
        lengths[event.subject] = lengths.get(event.subject, 0.0) + (after.t_ns - event.t_ns) / 1e9
    return lengths
