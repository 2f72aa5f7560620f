"""What a recipe may ask of reference spectra, and what is told of calibrations."""

from __future__ import annotations

from datetime import UTC, datetime
from pathlib import Path

import pytest
from fakes.config_files import RECIPE, RIG, Edit, block, edited, problems_of, write

from rigd.config import load_pair
from rigd.config.calibrating import facts, from_facts, problems
from rigd.model.calibration import Calibrated
from rigd.model.errors import JournalError
from rigd.model.records import RecordKind

SECTION: Edit = ("[leak_test]\n", "[references]\nspectra = 4\n\n[leak_test]\n")
ITEM: Edit = ('id = "bed"\n', 'id = "bed"\nreference = "acid-feed"\n')


def codes(tmp_path: Path, *edits: Edit, rig: str = RIG) -> set[str]:
    return {one.code for one in problems_of(tmp_path, rig=rig, recipe=edited(RECIPE, *edits))}


def test_a_recipe_with_references_is_read(tmp_path: Path) -> None:
    recipe = load_pair(*write(tmp_path, recipe=edited(RECIPE, SECTION, ITEM))).recipe
    assert recipe is not None
    assert recipe.references is not None
    assert recipe.references.spectra == 4
    assert recipe.checklist[0].reference == "acid-feed"


def test_what_cannot_be_recorded_is_refused(tmp_path: Path) -> None:
    assert "reference-unasked" in codes(tmp_path, ITEM)
    assert "reference-unknown" in codes(tmp_path, SECTION, (ITEM[0], ITEM[1].replace("acid-feed", "acid-fed")))
    start, end = RECIPE.index("[conditioning]"), RECIPE.index("[leak_test]")
    assert "references-no-time" in codes(tmp_path, SECTION, (RECIPE[start:end], ""))


def test_a_rig_without_a_cell_has_no_references(tmp_path: Path) -> None:
    bare = edited(
        RIG,
        (block(RIG, "IR"), ""),
        (block(RIG, "L-3"), ""),
        ('from = "COL"\nto = "IR"', 'from = "COL"\nto = "BPR"'),
        (block(RIG, "PT-2"), ""),
        (', { tag = "PT-2", above = "8 bar" }', ""),
        ('vote = "1oo2"', 'vote = "1oo1"'),
        (block(RIG, "ir-port"), ""),
        (block(RIG, "ir"), ""),
    )
    assert "references-no-cell" in codes(tmp_path, SECTION, rig=bare)


NOW = datetime(2026, 12, 1, tzinfo=UTC)
LATE = Calibrated(
    RecordKind.PUMP, "PU-A", "2026-01-01T00:00:00+00:00", "2026-07-01T00:00:00+00:00", "B", {"factor": 0.9}
)


def test_overdue_and_out_of_reach_are_told() -> None:
    told = {one.code: one for one in problems([LATE], NOW, {"PU-A": 4.8}, {"PU-A": 5.0})}
    assert set(told) == {"calibration-overdue", "calibrated-rate"}
    assert "4.5 mL/min" in told["calibrated-rate"].message
    assert not problems([LATE], datetime(2026, 2, 1, tzinfo=UTC), {"PU-A": 4.4}, {"PU-A": 5.0})


def test_a_segment_that_holds_something_else_than_drawn_is_told() -> None:
    def segment(volume_mL: float) -> Calibrated:
        values = {"volume_mL": volume_mL, "drawn_mL": 2.0}
        return Calibrated(RecordKind.SEGMENT, "L-1+COL", LATE.utc, "2999-01-01T00:00:00+00:00", "B", values)

    assert not problems([segment(2.1)], NOW, {}, {})
    (told,) = problems([segment(2.5)], NOW, {}, {})
    assert told.code == "volume-off"
    assert "2.5 mL by tracer" in told.message


def test_facts_there_and_back() -> None:
    assert from_facts(facts([LATE], NOW)) == (LATE,)
    with pytest.raises(JournalError, match="cannot be read"):
        from_facts([{"kind": "a guess"}])
