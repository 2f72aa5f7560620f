"""The digest: blind to spelling, order and comments; sensitive to anything that changes what is meant."""

from __future__ import annotations

import re
from pathlib import Path

import pytest
from fakes.card_rigs import manual_rig
from fakes.config_files import CHEMISTRY, RECIPE, RIG, Edit, edited, within, write

from rigd.config import load_recipe, load_rig


def digests(folder: Path, rig: str = RIG, recipe: str = RECIPE, chemistry: str = CHEMISTRY) -> tuple[str, str]:
    """Of rig and recipe."""
    rig_path, recipe_path = write(folder, rig, recipe, chemistry)
    made = load_rig(rig_path)
    return made.digest, load_recipe(recipe_path, made).digest


def test_a_digest_is_a_sha_256(tmp_path: Path) -> None:
    assert all(re.fullmatch(r"[0-9a-f]{64}", digest) for digest in digests(tmp_path))


@pytest.mark.parametrize(
    "edits",
    [
        (("# Every limit here", "# Each limit here"),),
        within("PU-A", 'rate_max = "5 mL/min"', 'rate_max = "5000 uL/min"'),
        within(
            "PU-A", 'rate_max = "5 mL/min"\nrefill_rate = "8 mL/min"', 'refill_rate = "8 mL/min"\nrate_max = "5 mL/min"'
        ),
        within("PU-A", "syringes = 2", 'syringes = 2\nscrew_pitch = "1 mm"'),
        (("../chemistry/esterification.toml", "../rigs/../chemistry/esterification.toml"),),
    ],
    ids=["comment", "unit", "order of keys", "default written out", "path of the chemistry"],
)
def test_spelling_does_not_change_it(edits: tuple[Edit, ...], tmp_path: Path) -> None:
    assert digests(tmp_path, rig=edited(RIG, *edits))[0] == digests(tmp_path)[0]


@pytest.mark.parametrize(
    "edits",
    [
        within("PU-A", 'rate_max = "5 mL/min"', 'rate_max = "4.999 mL/min"'),
        within("BED-HOT", '"2 s"', '"3 s"'),
        (("seed = 7", "seed = 8"),),
        within("ir", 'link = "ir-port"', 'link = "ir-port"\noptions = { x = 1 }'),
    ],
)
def test_any_change_of_the_rig_changes_it(edits: tuple[Edit, ...], tmp_path: Path) -> None:
    before, after = digests(tmp_path), digests(tmp_path, rig=edited(RIG, *edits))

    assert before[0] != after[0]
    assert before[1] == after[1]


def test_the_chemistry_is_part_of_the_rig(tmp_path: Path) -> None:
    changed = edited(CHEMISTRY, ("equilibrium_constant = 4.0", "equilibrium_constant = 4.1"))

    assert digests(tmp_path)[0] != digests(tmp_path, chemistry=changed)[0]


def test_a_change_of_the_recipe_changes_only_its_own(tmp_path: Path) -> None:
    before = digests(tmp_path)
    after = digests(tmp_path, recipe=edited(RECIPE, ("count = 6", "count = 7")))

    assert before[0] == after[0]
    assert before[1] != after[1]


def test_a_protocol_card_is_part_of_the_rig(tmp_path: Path) -> None:
    (tmp_path / "rigs").mkdir()
    rig, _ = manual_rig(tmp_path, {"pumps": 1, "map": 2, "chiller": "/dev/null"})
    before, card = load_rig(rig).digest, tmp_path / "rigs/ascii-pump.toml"
    text = card.read_text(encoding="utf-8")
    card.write_text(f"{text}\n# a comment\n", encoding="utf-8")
    assert load_rig(rig).digest == before
    card.write_text(text.replace("range = [0.005, 20.0]", "range = [0.005, 10.0]"), encoding="utf-8")
    assert load_rig(rig).digest != before


def test_port_settings_that_a_link_leaves_out_are_those_of_its_card(tmp_path: Path) -> None:
    (tmp_path / "rigs").mkdir()
    rig, _ = manual_rig(tmp_path, {"pumps": 1, "map": 2, "chiller": "/dev/null"})
    rig.write_text(rig.read_text(encoding="utf-8").replace('baud = "4800 baud"', "stop_bits = 2.0"), encoding="utf-8")
    link = {one.id: one for one in load_rig(rig).links}["cooler"]
    assert (link.baud, link.data_bits, link.parity, link.stop_bits) == (4800, 7, "even", 2.0)
