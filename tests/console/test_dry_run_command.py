"""``rigd dry-run``: promised keys, exit codes, the same digest again. An early block keeps the rehearsals short."""

from __future__ import annotations

import json
import os
import re
import subprocess
import sys
from pathlib import Path

import pytest

from rigd.console import rehearsal
from rigd.console.cli import call

CONFIGS = Path(__file__).resolve().parents[2] / "configs"
FILES = (str(CONFIGS / "rigs/two-pump-column.toml"), str(CONFIGS / "recipes/demo-sweep.toml"))
BLOCK = ("--fault", "block@L-4,at=40 s")
KEYS = {
    "outcome", "seed", "digest", "duration_s", "wall_s", "points", "peak", "used_mL", "trips", "alarms",
}  # fmt: skip


def rehearse(capsys, *more: str) -> tuple[int, dict]:
    code = call(["dry-run", *FILES, "--json", *more])
    return code, json.loads(capsys.readouterr().out)


def test_a_blocked_outlet_trips_and_is_told(capsys, tmp_path):
    code, facts = rehearse(capsys, *BLOCK, "--out", str(tmp_path / "out"))
    assert code == 1
    assert set(facts) >= KEYS
    assert facts["outcome"] == "tripped"
    (first,) = [trip for trip in facts["trips"] if trip["first_out"]]
    assert first["id"] == "PRESSURE-HIGH"
    assert 40 < first["t_s"] < 60
    assert 8.0 < facts["peak"]["PT-1"] < 20.0  # above the limit, below the weakest rating
    assert "PRESSURE-HIGH" in (tmp_path / "out" / "report.html").read_text()
    again_code, again = rehearse(capsys, *BLOCK)
    assert (again_code, again["digest"]) == (1, facts["digest"])
    _, other = rehearse(capsys, *BLOCK, "--seed", "8")
    assert other["digest"] != facts["digest"]


def test_the_page_alone_holds_the_curves_and_what_would_go_wrong(capsys, tmp_path):
    page = tmp_path / "new" / "page.html"
    code, facts = rehearse(capsys, *BLOCK, "--report", str(page))
    assert code == 1
    assert any(line.startswith("PRESSURE-HIGH would trip at 0:00:") for line in facts["foreseen"])
    text = page.read_text()
    assert "What would go wrong" in text
    assert "PRESSURE-HIGH would trip" in text
    assert text.count("<svg") >= 1
    assert not re.search(r'(src|href)="(?!#|data:)', text)
    assert "rigd-dry-" not in text
    assert [path.name for path in tmp_path.rglob("*")] == ["new", "page.html"]


def test_a_rehearsal_that_does_not_end_is_ended_and_says_so(capsys, monkeypatch):
    monkeypatch.setattr(rehearsal, "longest_ns", lambda planned_s: 5_000_000_000 if planned_s > 600 else 0)
    code, facts = rehearse(capsys)
    assert (code, facts["outcome"], facts["duration_s"]) == (1, "stopped", 5.0)
    assert facts["text"] == "The recipe was not over after 0.0 h and was ended here."


def test_the_bound_is_a_multiple_of_the_plan_and_an_hour():
    assert rehearsal.longest_ns(1000.0) == (rehearsal.PATIENCE * 1000 + 3600) * 1_000_000_000


def test_a_folder_that_holds_a_run_is_not_overwritten(tmp_path, capsys):
    (tmp_path / "run.sqlite").write_text("something")
    assert call(["dry-run", *FILES, "--out", str(tmp_path)]) == 2
    assert (tmp_path / "run.sqlite").read_text() == "something"
    assert "holds a run already" in capsys.readouterr().err


@pytest.mark.parametrize("fault", ["blok@L-4", "block@L-99"])
def test_an_unknown_fault_is_a_sentence(fault, capsys):
    assert call(["dry-run", *FILES, "--fault", fault]) == 2
    error = capsys.readouterr().err
    assert "Traceback" not in error
    assert fault.split("@")[0] in error or "L-99" in error


@pytest.mark.slow
@pytest.mark.timeout(300)
def test_the_demonstration_is_done_and_agrees_with_the_plan(capsys):
    code, facts = rehearse(capsys)
    assert code == 0
    assert all(0 < point["conversion_sd"] < 0.01 for point in facts["points"])
    assert facts["outcome"] == "done"
    assert len(facts["points"]) == 6
    assert facts["trips"] == []
    assert call(["check", *FILES, "--json"]) == 0
    planned = json.loads(capsys.readouterr().out)
    assert facts["duration_s"] == pytest.approx(planned["duration_s"], rel=0.03)
    for liquid, volume in planned["used_mL"].items():
        near = 0.02 if liquid == "solvent" else 0.2  # reagent: the signal gate takes longer than its shortest time
        assert facts["used_mL"][liquid] == pytest.approx(volume, rel=near)


@pytest.mark.slow
@pytest.mark.timeout(120)
@pytest.mark.parametrize(
    ("before", "options", "hash_seed"),
    [((), ("-O",), "0"), ((), (), "4711"), (("taskset", "-c", "0"), (), "1")],
    ids=["optimised", "other hash seed", "one core"],
)
def test_the_digest_is_the_same_in_any_process(capsys, before, options, hash_seed):
    _, here = rehearse(capsys, *BLOCK)
    command = [*before, sys.executable, *options, "-m", "rigd", "dry-run", *FILES, "--json", *BLOCK]
    environment = {**os.environ, "PYTHONHASHSEED": hash_seed}
    ran = subprocess.run(command, env=environment, capture_output=True, text=True, timeout=60)
    assert ran.returncode == 1, ran.stderr
    assert json.loads(ran.stdout)["digest"] == here["digest"]
