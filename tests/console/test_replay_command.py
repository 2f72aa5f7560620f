"""``rigd replay``: the verdict, what-if, the deck and its keys."""

from __future__ import annotations

import json
from pathlib import Path

import pytest
from fakes.recorded import BLOCK, CONFIGS, RIG, copy_of, recorded, spoilt

from rigd.console.cli import call
from rigd.console.playback import JUMP_NS, LONG_JUMP_NS, SPEEDS, Deck
from rigd.console.replay_view import shift_words
from rigd.console.replay_watch import keys_in
from rigd.model.events import EventKind
from rigd.runtime.what_if import Change

S = 1_000_000_000
DECK = Deck(start_ns=0, end_ns=3600 * S, chapters_ns=(100 * S, 200 * S), position_ns=1000 * S)


def test_no_divergence_is_said_and_exit_0(capsys):
    assert call(["replay", str(recorded())]) == 0
    said = capsys.readouterr().out
    assert "no divergence" in said
    assert "samples/s" in said


def test_json_is_one_document(capsys):
    assert call(["replay", str(recorded(BLOCK)), "--json"]) == 0
    facts = json.loads(capsys.readouterr().out)
    assert facts["same"] is True
    assert facts["first"] is None
    assert facts["samples"] > 100


def test_the_first_difference_is_shown_side_by_side_and_exit_1(tmp_path, capsys):
    run = copy_of(recorded(), tmp_path)
    with spoilt(run) as tables:
        ((scan,),) = tables.execute("SELECT scan FROM orders WHERE action = 'deliver' LIMIT 1")
        tables.execute("UPDATE orders SET value = 3.25 WHERE scan = ? AND action = 'deliver'", (scan,))
    assert call(["replay", str(run)]) == 1
    said = capsys.readouterr().out
    assert f"order in scan {scan}" in said
    assert "deliver 3.25" in said
    assert "recorded" in said
    assert call(["replay", str(run), "--json"]) == 1
    assert json.loads(capsys.readouterr().out)["first"]["scan"] == scan


def test_what_if_lists_the_trip_and_exit_1(tmp_path, capsys):
    text = RIG.read_text().replace("../chemistry", str(CONFIGS / "chemistry"))
    other = tmp_path / "other.toml"
    other.write_text(text.replace('above = "8 bar"', 'above = "6 bar"'))
    assert call(["replay", str(recorded(BLOCK)), "--with", str(other)]) == 1
    assert "earlier" in capsys.readouterr().out
    assert call(["replay", str(recorded(BLOCK)), "--with", str(other), "--json"]) == 1
    facts = json.loads(capsys.readouterr().out)
    trip = next(one for one in facts["changes"] if (one["kind"], one["subject"]) == ("trip", "PRESSURE-HIGH"))
    assert trip["earlier_s"] == pytest.approx(trip["recorded_s"] - trip["would_s"])
    other.write_text(text)
    assert call(["replay", str(recorded(BLOCK)), "--with", str(other)]) == 0
    assert "nothing would have been different" in " ".join(capsys.readouterr().out.split())


def test_without_a_terminal_watch_shows_one_frame(capsys):
    assert call(["replay", str(recorded()), "--watch", "--from", "1 min"]) == 0
    said = capsys.readouterr().out
    assert "0:01:00" in said
    assert "PLAYBACK" in said
    assert "PT-1" in said
    assert call(["replay", str(recorded()), "--watch", "--from", "60 s", "--json"]) == 0
    assert json.loads(capsys.readouterr().out)["t_s"] == pytest.approx(60, abs=0.5)


@pytest.mark.parametrize(
    ("words", "code", "says"),
    [
        (["nowhere"], 2, "there is no run"),
        (["RUN", "--from", "soon", "--watch"], 2, "--from"),
        (["RUN", "--with", "no.toml"], 2, "no.toml"),
        (["RUN", "--watch", "--with", "no.toml"], 2, "leave --with out"),
        (["RUN", "--speed", "0"], 2, "--speed"),
    ],
)
def test_wrong_words(words, code, says, capsys, monkeypatch, tmp_path):
    monkeypatch.chdir(tmp_path)
    assert call(["replay", *(str(recorded()) if word == "RUN" else word for word in words)]) == code
    said = capsys.readouterr()
    assert says in said.err + said.out
    assert "Traceback" not in said.err


def test_a_damaged_journal_is_a_sentence(tmp_path, capsys):
    run = copy_of(recorded(), tmp_path)
    with spoilt(run) as tables:
        tables.execute("DROP TABLE inputs")
    for more in ([], ["--watch"], ["--with", str(RIG)]):
        assert call(["replay", str(run), *more]) == 2
        assert "is damaged" in " ".join(capsys.readouterr().err.split())
    (run / "run.sqlite").write_bytes(b"")
    assert call(["replay", str(run)]) == 2
    assert "run journal" in " ".join(capsys.readouterr().err.split())


def test_time_passes_at_the_speed_and_stops_at_the_end():
    deck = DECK.passed(2.0)
    assert deck.position_ns == 1000 * S + 20 * S
    deck = DECK.passed(1000.0)
    assert (deck.position_ns, deck.playing) == (3600 * S, False)
    assert deck.passed(10.0) == deck


def test_space_pauses_goes_on_and_begins_anew_at_the_end():
    paused = DECK.pressed(" ")
    assert not paused.playing
    assert paused.passed(5.0) == paused
    assert paused.pressed(" ").playing
    again = DECK.passed(1000.0).pressed(" ")
    assert (again.playing, again.position_ns) == (True, 0)


def test_arrows_digits_and_chapters_jump_within_the_run():
    assert DECK.pressed("right").position_ns == 1000 * S + JUMP_NS
    assert DECK.pressed("left").position_ns == 1000 * S - JUMP_NS
    assert DECK.pressed("up").position_ns == 1000 * S + LONG_JUMP_NS
    assert DECK.moved(10 * S).pressed("down").position_ns == 0
    assert DECK.pressed("5").position_ns == 1800 * S
    assert DECK.pressed("0").position_ns == 0
    assert DECK.pressed("[").position_ns == 200 * S
    assert DECK.pressed("[").pressed("[").position_ns == 100 * S
    assert DECK.pressed("[").pressed("[").pressed("[").position_ns == 0
    assert DECK.pressed("]").position_ns == 3600 * S
    assert DECK.moved(50 * S).pressed("]").position_ns == 100 * S


def test_single_scans_pause_first():
    deck = DECK.pressed(".")
    assert (deck.step, deck.playing) == (1, False)
    assert DECK.pressed(",").step == -1
    shown = deck.shown(1001 * S)
    assert (shown.step, shown.position_ns) == (0, 1001 * S)


def test_speed_goes_up_and_down_its_scale():
    assert DECK.speed == 10.0
    assert DECK.pressed("+").speed == 25.0
    assert DECK.pressed("-").speed == 5.0
    fastest = DECK
    for _ in range(50):
        fastest = fastest.pressed("=")
    assert fastest.speed == SPEEDS[-1]


def test_q_leaves_and_other_keys_do_nothing():
    assert DECK.pressed("q").left
    for key in ("x", "\n", "é", "²"):
        assert DECK.pressed(key) == DECK


def test_keys_of_a_terminal():
    assert keys_in("\x1b[C\x1b[A q5") == ["right", "up", " ", "q", "5"]
    assert keys_in("\x1b[Z.\x1b") == ["."]


def test_a_shift_in_words():
    def change(was: int | None, would: int | None) -> Change:
        return Change(EventKind.TRIP, "X", "", was, would, "")

    assert shift_words(change(600 * S, 360 * S)) == "4.0 min earlier"
    assert shift_words(change(10 * S, 12 * S)) == "2.0 s later"
    assert shift_words(change(None, S)) == "only with the other rig"
    assert shift_words(change(S, None)) == "not with the other rig"


def test_a_run_can_be_named_by_its_journal(tmp_path: Path, capsys):
    run = copy_of(recorded(), tmp_path)
    assert call(["replay", str(run / "run.sqlite")]) == 0
    capsys.readouterr()
