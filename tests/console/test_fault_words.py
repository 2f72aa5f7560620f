"""Faults on the command line: how they are read, and what goes to the simulator."""

from __future__ import annotations

import math

import click
import pytest

from rigd.adapters import sim_client
from rigd.console.cli import call
from rigd.console.fault_words import parse_fault
from rigd.ports.plant import FaultSpec


@pytest.mark.parametrize(
    ("text", "spec"),
    [
        ("block@L-4", FaultSpec("block", "L-4", 0.0, math.inf, 1.0)),
        ("leak@L-1,at=2 min,size=0.5", FaultSpec("leak", "L-1", 120.0, math.inf, 0.5)),
        (" clog@COL , for=1 h , at=10 s ", FaultSpec("clog", "COL", 10.0, 3600.0, 1.0)),
    ],
)
def test_faults_are_read(text, spec):
    assert parse_fault(text) == spec


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("block", "KIND@TARGET"),
        ("@L-4", "KIND@TARGET"),
        ("block@L-4,at=10", "no unit"),
        ("block@L-4,when=10 s", "at=, for=, size="),
        ("block@L-4,size=big", "not a number"),
        ("block@L-4,size=nan", "not a number"),
    ],
)
def test_unreadable_faults_say_how_to_write_them(text, words):
    with pytest.raises(click.UsageError, match=words):
        parse_fault(text)


@pytest.fixture
def asked(monkeypatch, tmp_path):
    monkeypatch.setenv("RIGD_RUNTIME", str(tmp_path))
    (tmp_path / "rig-1").mkdir()
    (tmp_path / "rig-1" / "ports.json").write_text("{}")
    messages: list[dict] = []

    def ask(folder, message):
        messages.append({"folder": folder.name, **message})
        one = {"kind": "leak", "target": "L-1", "onset_s": 5.0, "duration_s": None, "magnitude": 1.0}
        return {"onset_s": 5.0, "t_s": 1.0, "active": [one]}

    monkeypatch.setattr(sim_client, "ask", ask)
    return messages


def test_inject_clear_and_list(asked, capsys):
    assert call(["fault", "inject", "leak", "L-1", "--for", "5 min", "--size", "0.5", "--after", "1 min"]) == 0
    assert call(["fault", "clear", "leak", "L-1"]) == 0
    assert call(["fault", "list"]) == 0
    assert asked[0] == {
        "folder": "rig-1", "do": "fault", "kind": "leak", "target": "L-1", "magnitude": 0.5, "after_s": 60.0,
        "duration_s": 300.0,
    }  # fmt: skip
    assert asked[1] == {"folder": "rig-1", "do": "clear", "kind": "leak", "target": "L-1"}
    assert "until cleared" in capsys.readouterr().out


def test_with_several_simulators_one_must_be_named(asked, tmp_path, capsys):
    (tmp_path / "rig-2").mkdir()
    (tmp_path / "rig-2" / "ports.json").write_text("{}")
    assert call(["fault", "list"]) == 1
    assert "rig-1, rig-2" in capsys.readouterr().err
    assert call(["fault", "list", "--rig", "rig-2"]) == 0
    assert asked[-1]["folder"] == "rig-2"
