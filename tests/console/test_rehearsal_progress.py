"""The bar of a rehearsal: none for a program that reads, none in the first second, then a share of the planned time."""

from __future__ import annotations

from io import StringIO
from types import SimpleNamespace

import pytest
from rich.console import Console

from rigd.console import rehearsal
from rigd.console.output import Output
from rigd.console.rehearsal import show_progress

STATE = SimpleNamespace(conduct=SimpleNamespace(phase="settle"))


def output(terminal: bool) -> tuple[Output, StringIO]:
    told, text = Output(), StringIO()
    told.errors = Console(file=text, force_terminal=terminal, width=100)
    return told, text


def test_nothing_is_drawn_where_no_person_looks():
    told, text = output(False)
    with show_progress(told, 3600.0) as watch:
        assert watch is None
    assert text.getvalue() == ""


@pytest.mark.parametrize(("after_s", "drawn"), [(0.0, True), (1000.0, False)])
def test_the_bar_comes_after_a_while(monkeypatch, after_s, drawn):
    monkeypatch.setattr(rehearsal, "PROGRESS_AFTER_S", after_s)
    told, text = output(True)
    with show_progress(told, 3600.0) as watch:
        assert watch is not None
        watch(1800 * 1_000_000_000, STATE)
    assert ("30 min" in text.getvalue()) is drawn
    assert ("settle" in text.getvalue()) is drawn
