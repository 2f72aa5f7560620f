"""README.md shows only what is there: TOML that loads, commands and options that exist, files that are here."""

from __future__ import annotations

import importlib
import re
import tomllib
from pathlib import Path

import pytest

from rigd.config.load import load_pair
from rigd.config.varied import read_nights
from rigd.console.cli import COMMANDS

ROOT = Path(__file__).resolve().parents[2]
README = (ROOT / "README.md").read_text(encoding="utf-8")
RIG, RECIPE = ROOT / "configs/rigs/two-pump-column.toml", ROOT / "configs/recipes/demo-sweep.toml"
ALL_EXCERPTS = re.findall(r"^```toml\n(.*?)^```$", README, re.MULTILINE | re.DOTALL)
NIGHTS_EXCERPTS = [text for text in ALL_EXCERPTS if text.startswith("[[vary]]")]
EXCERPTS = [text for text in ALL_EXCERPTS if text not in NIGHTS_EXCERPTS]
LINES = re.findall(r"^ {4}(rigd [^#\n]+)|`(rigd [^`]+)`", README, re.MULTILINE)
COMMAND_LINES = [(code or words).strip() for code, words in LINES]
FILES = set(re.findall(r"`((?:configs|drivers|sim)/[^`\s]*|[A-Z]+\.md)`|\]\(([^)#]+)\)", README))


def with_excerpt(excerpt: str, rig: str, recipe: str) -> tuple[str, str]:
    """The example pair with the excerpt put in: in place of what has its header and id, else at the end of the rig."""
    header, _, body = excerpt.partition("\n")
    name = re.search(r"^(?:id|name) = .*$", body, re.MULTILINE)
    for number, text in enumerate((rig, recipe)):
        for block in re.split(r"\n(?=\[)", text):
            if block.startswith(header) and (not header.startswith("[[") or (name and name[0] in block)):
                changed = text.replace(block.rstrip("\n"), excerpt.rstrip("\n"))
                return (changed, recipe) if number == 0 else (rig, changed)
    assert header.startswith("[outside"), f"{header} has no place in the examples"
    return rig + "\n" + excerpt, recipe


@pytest.mark.parametrize("excerpt", EXCERPTS, ids=lambda text: text.splitlines()[0])
def test_excerpt_loads_as_part_of_the_example(tmp_path: Path, excerpt: str) -> None:
    tomllib.loads(excerpt)
    rig, recipe = with_excerpt(excerpt, RIG.read_text(), RECIPE.read_text())
    rig = rig.replace("../chemistry/", f"{ROOT}/configs/chemistry/")
    (tmp_path / "rig.toml").write_text(rig)
    (tmp_path / "recipe.toml").write_text(recipe)
    assert load_pair(tmp_path / "rig.toml", tmp_path / "recipe.toml").recipe is not None


@pytest.mark.parametrize("excerpt", NIGHTS_EXCERPTS)
def test_excerpt_of_a_nights_file_is_one(tmp_path: Path, excerpt: str) -> None:
    head = (ROOT / "configs/nights/demo-nights.toml").read_text().partition("[[vary]]")[0]
    path = tmp_path / "nights.toml"
    path.write_text(head.replace('"../', f'"{ROOT}/configs/') + excerpt)
    nights = read_nights(path)
    assert len(nights.varied) == excerpt.count("[[vary]]")


def test_a_spoilt_excerpt_is_found_out(tmp_path: Path) -> None:
    valve = next(text for text in EXCERPTS if text.startswith("[[valves]]"))
    with pytest.raises(AssertionError):
        test_excerpt_loads_as_part_of_the_example(tmp_path, valve.replace("[[valves]]", "[[taps]]"))
    with pytest.raises(Exception, match="travel_tme"):
        test_excerpt_loads_as_part_of_the_example(tmp_path, valve.replace("travel_time", "travel_tme"))


@pytest.mark.parametrize("line", COMMAND_LINES)
def test_command_and_options_exist(line: str) -> None:
    words = line.split()[1:]
    if words[0] in ("COMMAND", "--help"):
        return
    assert words[0] in COMMANDS, line
    module, _, attribute = COMMANDS[words[0]][0].partition(":")
    command = getattr(importlib.import_module(f"rigd.console.commands.{module}"), attribute)
    if hasattr(command, "commands") and len(words) > 1:
        command = command.commands[words[1]]
    known = {option for parameter in command.params for option in parameter.opts}
    assert set(re.findall(r"--[a-z-]+", line)) - {"--help"} <= known, line


def test_every_command_has_its_row() -> None:
    assert set(re.findall(r"^\| `rigd ([a-z-]+)` \|", README, re.MULTILINE)) == set(COMMANDS)


@pytest.mark.parametrize("name", sorted({one or other for one, other in FILES}))
def test_file_is_there(name: str) -> None:
    assert (ROOT / name).exists(), name


def test_there_is_something_to_check() -> None:
    assert len(EXCERPTS) >= 6
    assert len(COMMAND_LINES) >= 30
    assert len(FILES) >= 8
