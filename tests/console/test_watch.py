"""What a watcher sees: state from messages, the drawing of any rig, a screen that fits 80 columns."""

from __future__ import annotations

from io import StringIO

import pytest
from fakes.conduct_rigs import one_pump, three_pumps, two_pumps
from fakes.snapshots import ALARM, event, snapshot, value
from hypothesis import given, settings
from hypothesis import strategies as st
from rich.console import Console

from rigd.console.flow_drawing import drawing, quantity
from rigd.console.progress import line, printed
from rigd.console.watch_state import EVENTS_KEPT, Watched, heard, told
from rigd.console.watch_view import bar, view
from rigd.logic.flow_path import flow_path


def text_of(renderable, width: int = 80) -> str:
    out = StringIO()
    Console(file=out, width=width, force_terminal=False, emoji=False).print(renderable)
    return out.getvalue()


def screen(state: Watched, width: int = 80, rig=None) -> str:
    rig = rig or two_pumps()
    return text_of(view(state, rig, flow_path(rig), width), width)


def test_messages_build_the_state():
    state = heard(heard(Watched(), snapshot(t_s=5.0)), event("point", "P1", 4.0, "P1 begins."))
    assert state.snapshot["t_s"] == 5.0
    assert state.events[-1].text == "P1 begins."
    assert heard(state, {"say": "something new"}) == state
    ended = heard(state, {"say": "end", "outcome": "done", "exit": 0})
    assert (ended.end, ended.exit_code) == ("done", 0)


def test_events_are_bounded():
    state = Watched()
    for number in range(EVENTS_KEPT + 50):
        state = heard(state, event("note", "x", number, str(number)))
    assert len(state.events) == EVENTS_KEPT
    assert state.events[-1].text == str(EVENTS_KEPT + 49)


@pytest.mark.parametrize("width", [80, 100, 160])
def test_the_screen_fits_and_says_what_matters(width):
    state = heard(Watched(), snapshot(alarms=[ALARM], prompts=[{"id": "vent", "text": "Is the flask vented?"}]))
    text = screen(heard(state, event("trip", "P", 1800, "PT-1 stood at 8.4 bar. " + "x" * 200)), width)
    assert max(map(len, text.splitlines())) <= width
    for words in ("SIMULATED", "×20", "Point P03", "points 2/6", "40 %", "3.41 bar", "60.2 °C?", "PRESSURE-RISING",
                  "Lower the flow", "Is the flask vented?", "rigd confirm vent", "PT-1 stood at 8.4 bar"):  # fmt: skip
        assert words in text, words
    assert len(text.splitlines()) <= 32


def test_bad_values_say_why_and_a_stop_is_shown():
    values = {**snapshot()["values"], "PT-2": value(None, "bar", "bad", "stale")}
    locks = {"PRESSURE-HIGH": "tripped active", "BED-HOT": "healthy", "X": "bypassed"}
    text = screen(heard(Watched(), snapshot(stop="cut", interlocks=locks, values=values)))
    assert "✗ stale" in text
    assert "CUT" in text
    assert "tripped: PRESSURE-HIGH" in text
    assert "BYPASSED: X" in text


def test_before_the_first_reset_it_says_so():
    assert "not yet reset" in screen(
        heard(Watched(), snapshot(interlocks={"A": "tripped clear", "B": "tripped clear"}))
    )


def test_a_lost_device_is_named():
    text = screen(heard(Watched(), snapshot(devices={"pump-a": {"link": "failed", "detail": "no reply in 0.3 s"}})))
    assert "pump-a: failed no reply in 0.3 s" in text


def test_nothing_yet_and_the_end():
    assert "waiting" in screen(Watched())
    assert "ended: done" in screen(heard(heard(Watched(), snapshot()), {"say": "end", "outcome": "done", "exit": 0}))


def test_without_the_rig_the_values_are_shown_all_the_same():
    assert "3.412 bar" in text_of(view(heard(Watched(), snapshot()), None, None, 80))


@pytest.mark.parametrize(("make", "feeds"), [(one_pump, 1), (two_pumps, 2), (three_pumps, 3)])
def test_any_rig_is_drawn_with_every_part(make, feeds):
    rig = make()
    values = {f"{pump.id}.flow": value(1.0, "mL/min") for pump in rig.pumps}
    values |= {"V-OUT.position": value(1, "", text="collect")}
    rows = [row.plain for row in drawing(rig, flow_path(rig), values, 80)]
    text = "\n".join(rows)
    assert max(map(len, rows)) <= 80
    assert all(pump.id in text for pump in rig.pumps)
    assert all(column.id in text for column in rig.columns)
    assert "V-OUT ▶ flask" in text
    assert sum("PU-" in row for row in rows) == feeds


def test_lines_are_heavy_only_where_something_flows():
    rig = two_pumps()
    values = {"PU-A.flow": value(1.0, "mL/min"), "PU-B.flow": value(0.0, "mL/min")}
    rows = [row.plain for row in drawing(rig, flow_path(rig), values, 80)]
    row_a, row_b = (next(row for row in rows if pump in row) for pump in ("PU-A", "PU-B"))
    assert "━" in row_a
    assert "─" in row_b
    assert "━" not in row_b.rstrip("┻▶")
    still = [row.plain for row in drawing(rig, flow_path(rig), {}, 80)]
    assert not any("━" in row for row in still)


@given(st.floats(allow_nan=True), st.integers(1, 60))
@settings(max_examples=100)
def test_a_bar_always_has_its_width(progress, width):
    if progress == progress:
        assert len(bar(progress, width)) == width


@pytest.mark.parametrize(
    ("entry", "measures", "shown"),
    [
        (value(0.372, "1"), "fraction", "37.2 %"),
        (value(3.4, "bar"), "pressure", "3.40 bar"),
        (value(60.0, "degC", "uncertain"), "temperature", "60.0 °C?"),
        (value(None, "bar", "bad", "link lost"), "pressure", "link lost"),
        (value(None, "bar"), "pressure", "–"),
        (value(1, "", text="collect"), "position", "collect"),
        (None, "", "–"),
    ],
)
def test_quantities(entry, measures, shown):
    assert quantity(entry, measures) == shown


@pytest.mark.parametrize("width", [60, 80, 120, 200])
def test_the_progress_line_is_one_line(width):
    state = heard(Watched(), snapshot(alarms=[ALARM]))
    shown = line(state, width)
    assert shown.cell_len < width
    assert "SIM" in shown.plain
    if width >= 80:
        assert "2/6 points" in shown.plain
        assert "X 37.2 %" in shown.plain
        assert "PRESSURE-RISING" in shown.plain
    if width >= 120:
        assert "3.41/2.10 bar" in shown.plain


def test_without_a_terminal_the_turning_points_are_printed():
    assert printed(told(event("phase", "prime", 61, "Priming begins."))).plain == "0:01:01 Priming begins."
    assert printed(told(event("valve", "V-A", 1, "moved"))) is None


@pytest.mark.parametrize("height", [24, 30, 40])
def test_a_screen_keeps_its_foot_its_last_event_and_every_bad_value(height):
    tags = {f"PU-{n}.{what}": value(0.5, "mL/min") for n in range(4) for what in ("flow", "state", "position")}
    values = {**snapshot()["values"], **tags, "PU-9.flow": value(None, "mL/min", "bad", "stale")}
    state = heard(Watched(), snapshot(values=values))
    for number in range(8):
        state = heard(state, event("note", "x", number, f"event {number}"))
    rig = two_pumps()
    text = text_of(view(state, rig, flow_path(rig), 80, height=height))
    assert len(text.splitlines()) <= height
    for words in ("q leaves", "event 7", "✗ stale"):
        assert words in text, words


def test_a_conversion_of_nothing_is_a_dash_and_not_a_fault():
    values = {**snapshot()["values"], "IR.conversion": value(None, "1", "bad", "not a number")}
    text = screen(heard(Watched(), snapshot(values=values)))
    assert "not a number" not in text
