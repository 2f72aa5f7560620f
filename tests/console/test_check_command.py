"""``rigd check``: exit codes, the promised keys, helpful answers to broken files."""

from __future__ import annotations

import json
import shutil
from pathlib import Path

import pytest

from rigd.console.cli import call

CONFIGS = Path(__file__).resolve().parents[2] / "configs"
RIG, RECIPE = "rigs/two-pump-column.toml", "recipes/demo-sweep.toml"


@pytest.fixture
def files(tmp_path):
    shutil.copytree(CONFIGS, tmp_path / "configs")
    return tmp_path / "configs"


def change(path: Path, old: str, new: str) -> int:
    """Change the first occurrence; returns its line."""
    text = path.read_text()
    assert old in text
    path.write_text(text.replace(old, new, 1))
    return text[: text.index(old)].count("\n") + 1


def check(files: Path, capsys, *more: str) -> tuple[int, dict, str]:
    code = call(["check", str(files / RIG), str(files / RECIPE), "--json", *more])
    captured = capsys.readouterr()
    return code, json.loads(captured.out), captured.err


def test_the_example_is_fit_and_has_the_promised_keys(files, capsys):
    code, facts, _ = check(files, capsys)
    assert code == 0
    assert facts["fit"] is True
    assert {"problems", "duration_s", "used_mL", "interlocks"} <= set(facts)
    pressure = next(lock for lock in facts["interlocks"] if lock["id"] == "PRESSURE-HIGH")
    assert {"response_time_s", "process_safety_time_s", "margin"} <= set(pressure)
    assert pressure["process_safety_time_s"] == pytest.approx(12.0 * 0.02 / (4 / 60))  # (20 - 8) bar x C / Q by hand
    assert pressure["margin"] > 1
    assert facts["duration_s"] > 600
    assert facts["used_mL"]["acid-feed"] > 5


def test_people_see_the_table_and_the_verdict(files, capsys):
    assert call(["check", str(files / RIG), str(files / RECIPE)]) == 0
    shown = capsys.readouterr().out
    for words in ("PRESSURE-HIGH", "1oo2", "above 8 bar", "fit to run", "relief device"):
        assert words in shown


def test_a_rig_alone_is_checked_at_the_pumps_largest_rates(files, capsys):
    assert call(["check", str(files / RIG), "--json"]) == 0
    facts = json.loads(capsys.readouterr().out)
    pressure = next(lock for lock in facts["interlocks"] if lock["id"] == "PRESSURE-HIGH")
    assert pressure["process_safety_time_s"] == pytest.approx(12.0 * 0.02 / (10 / 60))


def test_a_rig_too_stiff_for_its_flow_is_not_fit(files, capsys):
    path = files / RIG
    path.write_text(path.read_text().replace('compliance = "0.01 mL/bar"', 'compliance = "0.002 mL/bar"'))
    code, facts, people = check(files, capsys)
    assert code == 1
    assert facts["fit"] is False
    assert [problem["code"] for problem in facts["problems"]].count("response-slow") >= 1
    assert "NOT fit to run" in people
    assert "mL/min" in people


BROKEN = [
    (RIG, 'bore = "10.30 mm"', 'bore = "10.30"', "unit"),
    (RIG, 'stroke_volume = "5 mL"', 'stroke_volume = "5 min"', "volume"),
    (RIG, "syringes = 2", "syringse = 2", "syringes"),
    (RIG, 'to = "V-A.solvent"', 'to = "V-Z.solvent"', "V-Z"),
    (RIG, 'id = "PU-B"', 'id = "PU-A"', "PU-A"),
    (RIG, 'above = "8 bar" }, { tag', 'above = "80 bar" }, { tag', "bar"),
    (RIG, 'schema = "rigd-rig-1"', 'schema = "rigd-rig-1', "TOML"),
    (RECIPE, 'total_flow = "4 mL/min"', 'total_flow = "4 mL/mn"', "mL/min"),
    (RECIPE, "PU-A = 1", "PU-X = 1", "PU-X"),
    (RECIPE, 'signal = "IR.conversion"', 'signal = "IR.convrsion"', "IR.conversion"),
]


@pytest.mark.parametrize(("name", "old", "new", "hint"), BROKEN, ids=[row[2][:24] for row in BROKEN])
def test_ten_broken_files_get_ten_helpful_answers(files, name, old, new, hint, capsys):
    line = change(files / name, old, new)
    code = call(["check", str(files / RIG), str(files / RECIPE)])
    shown = capsys.readouterr().err
    assert code == 2
    assert "Traceback" not in shown
    assert hint in shown
    assert f"{Path(name).name}:" in shown
    assert any(f".toml:{number}" in shown for number in (line, line - 1, line + 1)) or "PU-A" in new
    assert "do: " in shown


PLANNED = [
    # what is changed in which file, the finding of the plan, what its line says
    (
        RIG,
        'liquid = "acid-feed"\ncontent = "230 mL"',
        'liquid = "acid-feed"\ncontent = "24 mL"',
        "bottle-short",
        "24 mL",
    ),
    (RIG, 'role = "waste"\ncapacity = "2 L"', 'role = "waste"\ncapacity = "60 mL"', "waste-overflow", "60 mL"),
    (RIG, 'compliance = "0.01 mL/bar"', 'compliance = "0.0001 mL/bar"', "response-slow", "[[interlocks]]"),
    (RIG, 'stroke_volume = "5 mL"', 'stroke_volume = "2 mL"', "flush-blocked", "0.5 mL"),
    (RECIPE, "volumes = 2.5", "volumes = 1.05", "settle-short", "1.05"),
]


@pytest.mark.parametrize(("name", "old", "new", "problem", "said"), PLANNED, ids=[row[3] for row in PLANNED])
def test_what_the_plan_finds_says_where(files, name, old, new, problem, said, capsys):
    path = files / name
    path.write_text(path.read_text().replace(old, new))
    _, facts, people = check(files, capsys)
    assert all(found["where"] and found["line"] for found in facts["problems"])
    found = next(found for found in facts["problems"] if found["code"] == problem)
    assert said in Path(found["file"]).read_text().splitlines()[found["line"] - 1]
    assert f"{Path(found['file']).name}:{found['line']}" in people


def test_what_is_left_in_each_bottle_and_the_largest_flow_are_told(files, capsys):
    _, facts, _ = check(files, capsys)
    assert facts["left_mL"]["acid-feed"] == pytest.approx(230 - facts["used_mL"]["acid-feed"])
    assert sum(sum(phase["drawn_mL"].values()) for phase in facts["phases"]) == pytest.approx(
        sum(facts["used_mL"].values())
    )
    pressure = next(lock for lock in facts["interlocks"] if lock["id"] == "PRESSURE-HIGH")
    # at the largest flow the response takes half of (20 - 8) bar x C / Q, by hand
    largest_mL_min = 0.5 * 12.0 * 0.02 / pressure["response_time_s"] * 60
    assert pressure["flow_max_mL_min"] == pytest.approx(largest_mL_min, rel=1e-3)
    call(["check", str(files / RIG), str(files / RECIPE)])
    shown = capsys.readouterr().out
    for words in (f" {pressure['flow_max_mL_min']:.3g}", f" {facts['left_mL']['acid-feed']:.0f} ", "lasts"):
        assert words in shown


def test_a_bottle_that_does_not_last_is_said_beside_its_numbers(files, capsys):
    path = files / RIG
    path.write_text(path.read_text().replace('acid-feed"\ncontent = "230 mL"', 'acid-feed"\ncontent = "24 mL"'))
    assert call(["check", str(files / RIG), str(files / RECIPE)]) == 1
    rows = [line for line in capsys.readouterr().out.splitlines() if "acid-feed" in line and line.rstrip()[-2:] == "no"]
    assert len(rows) == 1


ENABLE_CARD = """
schema = "rigd-card-1"
title = "drive enable (invented)"
family = "sensor"
{prepare}
[link]
protocol = "modbus-tcp"

[registers]
enable = {{ table = "coil", address = 4 }}

[channels.on]
read = "enable"

[stop]
{stop}
"""
ENABLE_DEVICE = """
[[sensors]]
tag = "ES-1"
title = "drive enable"
measures = "state"
at = "IR"
labels = ["off", "on"]
device = "drive-enable"
channel = "on"

[[links]]
id = "io"
port = "socket://127.0.0.1:1"

[[devices]]
id = "drive-enable"
driver = "card"
link = "io"
last_resort = true
options = { card = "enable.toml" }
"""


def with_drive_enable(files: Path, stop: str) -> None:
    """An output that gives power to the pumps, connected by a protocol card: no line of Python."""
    prepare = '[[prepare]]\nwrite = "enable"\nset = 1\n' if "steps" in stop else ""
    (files / "rigs" / "enable.toml").write_text(ENABLE_CARD.format(stop=stop, prepare=prepare))
    rig = files / RIG
    rig.write_text(rig.read_text() + ENABLE_DEVICE)


def test_last_wills_are_shown_pumps_first_and_the_drive_power_last(files, capsys):
    with_drive_enable(files, 'steps = [{ write = "enable", set = 0 }]\ncheck = [{ read = "enable", equals = 0 }]')
    _, facts, _ = check(files, capsys)
    wills = facts["last_wills"]
    assert [will["device"] for will in wills][:2] == ["pump-a", "pump-b"]
    assert [will["device"] for will in wills if will["last_resort"]] == ["drive-enable"] == [wills[-1]["device"]]
    assert bytes.fromhex(wills[-1]["frames"][0]["request"]).endswith(bytes.fromhex("0500040000"))  # write coil 4, off
    assert all(will["frames"] and will["check"] for will in wills)
    assert call(["check", str(files / RIG), "--wills"]) == 0
    said = capsys.readouterr()
    assert "drive-enable" in said.out + said.err
    assert "(last resort)" in said.out + said.err


def test_a_last_resort_that_takes_nothing_away_is_refused(files, capsys):
    with_drive_enable(files, 'moves_nothing = "it only measures"')
    assert call(["check", str(files / RIG)]) == 2
    assert "its driver knows nothing that takes the power away" in capsys.readouterr().err
