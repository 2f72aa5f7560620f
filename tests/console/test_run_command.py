"""``rigd run`` before anything moves: who signs, what is resumed, what is said when the rig is not there."""

from __future__ import annotations

import os
import re
import shutil
import subprocess
import sys
from pathlib import Path

import click
import pytest

from rigd import app
from rigd.adapters.journal_sqlite import SqliteJournal
from rigd.config.load import load_pair
from rigd.console.cli import call
from rigd.console.commands.run import collected_points
from rigd.console.run_names import find_run
from rigd.model.errors import RigError
from rigd.model.events import Event, EventKind
from rigd.model.intake import NOTHING

CONFIGS = Path(__file__).resolve().parents[2] / "configs"
RIG, RECIPE = "rigs/two-pump-column.toml", "recipes/demo-sweep.toml"


@pytest.fixture
def files(tmp_path, monkeypatch):
    monkeypatch.setenv("RIGD_RUNTIME", str(tmp_path / "rt"))
    shutil.copytree(CONFIGS, tmp_path / "configs")
    return tmp_path / "configs"


@pytest.fixture
def started(monkeypatch):
    """What would have been started: (rig, recipe, settings)."""
    calls: list[tuple] = []
    monkeypatch.setattr(app, "start_run", lambda *arguments: calls.append(arguments))
    return calls


def real_ports(files: Path) -> None:
    path = files / RIG
    number = iter(range(99))
    path.write_text(
        re.sub('port = "simulated"', lambda _: f'port = "/dev/serial/by-id/none-{next(number)}"', path.read_text())
    )


def run(files: Path, *more: str) -> int:
    return call(["run", str(files / RIG), str(files / RECIPE), "--runs", str(files.parent / "runs"), *more])


def test_a_simulated_rig_starts_without_a_signature(files, started):
    assert run(files, "--pace", "20") == 0
    settings = started[0][2]
    assert (settings.signer, settings.pace, settings.collected) == ("", 20.0, ())
    assert "rigd.console.progress" in settings.progress
    assert settings.after[-2:] == ("report", "{folder}")


def test_with_json_the_report_speaks_json(files, started):
    run(files, "--json")
    assert started[0][2].after[-1] == "--json"


def test_a_real_rig_without_terminal_and_signature_is_refused(files, started, capsys):
    real_ports(files)
    assert run(files) == 2
    assert "--sign NAME" in capsys.readouterr().err
    assert started == []


def test_a_real_rig_starts_in_the_name_given(files, started):
    real_ports(files)
    assert run(files, "--sign", "Ada") == 0
    assert started[0][2].signer == "Ada"


@pytest.mark.parametrize("pace", ["0", "-1", "fast"])
def test_a_senseless_pace_is_refused(files, started, pace, capsys):
    assert run(files, "--pace", pace) == 2
    assert started == []
    assert "--pace" in capsys.readouterr().err


def test_without_the_simulator_it_says_how_to_start_it(files, capsys):
    assert run(files, "--pace", "20") == 1
    error = " ".join(capsys.readouterr().err.split())
    assert "is not being served" in error
    assert "rigd sim" in error
    assert not (files.parent / "runs").exists()


def test_pace_on_real_ports_is_refused(files, capsys):
    real_ports(files)
    assert run(files, "--sign", "Ada", "--pace", "20") == 1
    assert "pace 20 needs a simulated rig" in " ".join(capsys.readouterr().err.split())


def earlier_run(folder: Path, files: Path, collected: tuple[str, ...], **changes: str) -> Path:
    pair = load_pair(files / RIG, files / RECIPE)
    folder.mkdir(parents=True)
    meta = {"rig_digest": pair.rig.digest, "recipe_digest": pair.recipe.digest, "collected": '["P01"]', **changes}
    journal = SqliteJournal(folder / "run.sqlite", meta, pair.rig.tags)
    journal.scan(1, 0, "2030-01-01T00:00:00+00:00", NOTHING)
    points = [Event(EventKind.POINT, name, 0, "", {"status": "collected"}) for name in collected]
    journal.decided(1, (), [*points, Event(EventKind.POINT, "P04", 0, "", {"status": "abandoned"})])
    journal.close("stopped")
    return folder


def test_resuming_leaves_out_what_was_collected_then_and_before(files, started):
    earlier_run(files.parent / "runs" / "old", files, ("P02", "P03"))
    assert run(files, "--resume", "old") == 0
    assert started[0][2].collected == ("P01", "P02", "P03")


def test_resuming_another_recipe_is_refused(files):
    folder = earlier_run(files.parent / "runs" / "old", files, ("P02",), recipe_digest="0" * 64)
    pair = load_pair(files / RIG, files / RECIPE)
    with pytest.raises(click.UsageError, match="another recipe file"):
        collected_points(folder, pair.rig, pair.recipe)


def test_runs_are_found_by_folder_name_or_last(files, tmp_path):
    runs = files.parent / "runs"
    for name in ("20300101T000000Z-a", "20300102T000000Z-b"):
        earlier_run(runs / name, files, ())
    assert find_run(runs / "20300101T000000Z-a", runs) == runs / "20300101T000000Z-a"
    assert find_run("20300101T000000Z-a", runs) == runs / "20300101T000000Z-a"
    assert find_run("last", runs) == runs / "20300102T000000Z-b"
    assert find_run(runs / "20300101T000000Z-a" / "run.sqlite", runs) == runs / "20300101T000000Z-a"
    with pytest.raises(RigError, match=r"did you mean .*20300101T000000Z-a"):
        find_run("20300101T000000Z", runs)


def test_run_list_report_and_export_of_a_run(files, tmp_path, capsys):
    folder = earlier_run(files.parent / "runs" / "old", files, ("P02",))
    assert call(["runs", "--runs", str(folder.parent)]) == 0
    assert call(["report", str(folder)]) == 0
    assert call(["export", str(folder), "--out", str(tmp_path / "tables")]) == 0
    shown = capsys.readouterr().out
    assert "Stopped early" in shown
    assert (folder / "report.html").read_text().startswith("<!doctype html>")
    assert (tmp_path / "tables" / "events.csv").read_text().count("\n") == 3
    assert call(["export", str(folder), "--every", "0 s"]) == 2
    assert call(["report", str(tmp_path / "nothing")]) == 2


def test_a_damaged_journal_is_listed_and_reported_in_a_sentence(tmp_path, capsys):
    folder = tmp_path / "runs" / "torn"
    folder.mkdir(parents=True)
    (folder / "run.sqlite").write_bytes(b"this is not a database" * 100)
    assert call(["runs", "--runs", str(tmp_path / "runs")]) == 0
    assert "cannot be read" in capsys.readouterr().out
    assert call(["report", str(folder)]) == 2
    assert "Traceback" not in capsys.readouterr().err


@pytest.fixture
def terminal(monkeypatch):
    """Someone sits at the terminal and answers these questions in turn."""

    def sits(*answers: object) -> list[str]:
        asked, waiting = [], iter(answers)

        def answer(question: str, **_: object) -> object:
            asked.append(question)
            return next(waiting)

        for stream in ("stdin", "stderr"):
            monkeypatch.setattr(f"sys.{stream}.isatty", lambda: True, raising=False)
        monkeypatch.setattr(click, "prompt", answer)
        monkeypatch.setattr(click, "confirm", answer)
        return asked

    return sits


def test_at_a_terminal_each_item_is_asked_for_and_the_name_signs(files, started, terminal):
    real_ports(files)
    asked = terminal("Ada", True, True, True, True)
    assert run(files) == 0
    assert started[0][2].signer == "Ada"
    assert len(asked) == 1 + 3 + 1


@pytest.mark.parametrize("answers", [("Ada", True, False), ("Ada", True, True, True, False)])
def test_one_no_and_nothing_starts(files, started, terminal, answers, capsys):
    real_ports(files)
    terminal(*answers)
    assert run(files) == 2
    assert started == []
    assert "nothing was started" in " ".join(capsys.readouterr().err.split())


def test_ctrl_c_before_the_run_began_says_that_nothing_moved(files, monkeypatch, capsys):
    def interrupted(*_: object) -> None:
        raise KeyboardInterrupt

    monkeypatch.setattr(app, "start_run", interrupted)
    assert run(files) == 1
    assert "nothing was sent to the rig, nothing moved" in capsys.readouterr().err


@pytest.mark.parametrize(("word", "code"), [("run", 1), ("check", 130)])
def test_ctrl_c_while_the_command_line_is_loaded_is_a_sentence(tmp_path, word, code):
    (tmp_path / "click.py").write_text("raise KeyboardInterrupt\n")
    path = os.pathsep.join([str(tmp_path), str(CONFIGS.parent)])
    command = [sys.executable, "-m", "rigd", word, "a.toml", "b.toml"]
    done = subprocess.run(command, env={**os.environ, "PYTHONPATH": path}, capture_output=True, text=True, check=False)
    assert done.returncode == code
    assert "nothing was sent to a rig, nothing moved" in done.stderr
    assert "Traceback" not in done.stderr
