"""References are taken at the end of conditioning and when an item is signed; kept, used, and refused when odd."""

from __future__ import annotations

import logging
from pathlib import Path

import pytest
from fakes.config_files import RECIPE, edited, write

from rigd.adapters.journal_reader import JournalReader
from rigd.adapters.plugins import plant_maker
from rigd.app import DrySettings, dry_run
from rigd.config import load_pair
from rigd.conformance.bench import comparable
from rigd.model.events import Event, EventKind
from rigd.model.samples import Spectrum
from rigd.runtime.dry import DryOptions
from rigd.runtime.spectra import CellReader, cell_readers

VENT = 'text = "The collection flask and all bottles are vented."\n'
FEED = """
[[checklist]]
id = "feed"
text = "The cell was filled with acid feed by a syringe."
reference = "acid-feed"
"""
REFERENCES = edited(RECIPE, ("[leak_test]\n", "[references]\nspectra = 4\n\n[leak_test]\n"), (VENT, VENT + FEED))


def phase(name: str) -> Event:
    return Event(EventKind.PHASE, name, 0, "", {"step": "", "point": "", "label": name})


def signed(item: str) -> Event:
    return Event(EventKind.PROMPT, item, 0, "", {"text": "", "status": "confirmed", "who": "B"})


@pytest.fixture
def reader(tmp_path: Path) -> CellReader:
    pair = load_pair(*write(tmp_path, recipe=REFERENCES))
    return cell_readers(pair.rig, pair.recipe)["ir"]


def solvent_spectrum(tmp_path: Path) -> Spectrum:
    """Of the simulated rig at rest: the cell holds solvent."""
    (tmp_path / "sim").mkdir(exist_ok=True)
    plant = plant_maker().make(load_pair(*write(tmp_path / "sim")).rig, 3)
    plant.advance(30 * 10**9)
    return plant.spectrum("ir")


def test_the_blank_is_the_mean_of_the_last_ones_of_conditioning(reader: CellReader, tmp_path: Path) -> None:
    kept: list[Spectrum] = []
    reader.keep(kept.append)
    seen = solvent_spectrum(tmp_path)
    reader.hear([phase("conditioning")])
    for _ in range(6):
        reader(seen)
    assert not kept
    reader.hear([phase("leak-test")])
    (one,) = kept
    assert one.source == "IR: reference solvent"
    assert one.absorbance == pytest.approx(seen.absorbance)
    after = {reading.channel: reading.value for reading in reader(seen)}
    assert after["ethanol"] == pytest.approx(17.0, rel=1e-3)  # now by definition: that is what the bottle holds
    assert after["residual"] < 1e-6
    reader.hear([phase("switchover")])
    assert len(kept) == 1


def test_a_feed_that_is_not_in_the_cell_is_not_used(
    reader: CellReader, tmp_path: Path, caplog: pytest.LogCaptureFixture
) -> None:
    seen = solvent_spectrum(tmp_path)
    with caplog.at_level(logging.WARNING):
        reader.hear([signed("feed")])
        assert "0 spectra so far" in caplog.text
        for _ in range(4):
            before = reader(seen)
        reader.hear([signed("feed"), signed("vent")])
        assert comparable(reader(seen)) == comparable(before)
    assert set(reader.references.found) == {"acid-feed"}


def test_another_grid_forgets_what_was_seen(reader: CellReader, tmp_path: Path) -> None:
    seen = solvent_spectrum(tmp_path)
    for _ in range(4):
        reader(seen)
    reader.hear([phase("conditioning"), phase("leak-test")])
    assert reader.references.found
    reader(Spectrum("ir", 0, seen.start_per_cm, seen.step_per_cm, seen.absorbance[:-10]))
    assert not reader.references.found


def test_without_the_section_nothing_is_taken(tmp_path: Path) -> None:
    pair = load_pair(*write(tmp_path))
    reader = cell_readers(pair.rig, pair.recipe)["ir"]
    for _ in range(9):
        reader(solvent_spectrum(tmp_path))
    reader.hear([phase("conditioning"), phase("leak-test"), signed("bed")])
    assert not reader.references.found


@pytest.mark.slow
def test_a_rehearsal_keeps_the_blank_in_its_journal(tmp_path: Path) -> None:
    rig, recipe = write(tmp_path, recipe=REFERENCES)
    (tmp_path / "run").mkdir()
    done = dry_run(rig, recipe, DrySettings(journal=tmp_path / "run/run.sqlite", options=DryOptions()))
    assert done.result.outcome == "done", done.result.text
    with JournalReader(tmp_path / "run") as journal:
        sources = [one.source for one in journal.spectra() if "reference" in one.source]
    assert sources == ["IR: reference solvent"]  # in a rehearsal nobody fills the cell with feed
