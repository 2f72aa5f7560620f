"""The benchmark works and says what it must: structure only, no speed."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path

import pytest
from bench.figures import Figure, Scale, Target, exponent, not_built, quantile
from bench.readme_table import BEGIN, END, put
from bench.readme_table import main as refresh

RUN = Path(__file__).with_name("run.py")
KEYS = {"id", "what", "unit", "value", "floor", "floor_what", "ratio", "target", "held", "note", "failed"}


def run_bench(tmp_path: Path, *groups: str) -> tuple[dict[str, object], str]:
    """The JSON and the printed table of a quick run."""
    where = tmp_path / "bench.json"
    only = [word for group in groups for word in ("--only", group)]
    command = [sys.executable, str(RUN), "--quick", "--json", str(where), *only]
    done = subprocess.run(command, cwd=tmp_path, capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr + done.stdout
    return json.loads(where.read_text(encoding="utf-8")), done.stdout


def check(document: dict[str, object], ids: set[str]) -> None:
    """Every figure is whole, and its ratio and verdict follow from its numbers."""
    figures = document["figures"]
    assert isinstance(figures, list)
    assert {figure["id"] for figure in figures} == ids
    for figure in figures:
        assert set(figure) >= KEYS
        assert not figure["failed"]
        if figure["value"] is None:
            assert figure["note"] == "not built yet"
            assert figure["held"] is None
            continue
        assert figure["value"] >= 0
        assert (figure["floor"] is None) == (figure["ratio"] is None)
        if figure["floor"] is not None:
            assert figure["floor_what"]
            assert figure["ratio"] == pytest.approx(figure["value"] / figure["floor"])
        assert (figure["held"] is None) == (not figure["target"])


def test_the_quick_figures_are_whole(tmp_path: Path) -> None:
    document, table = run_bench(tmp_path, "scan", "journal")
    assert document["schema"] == "rigd-bench-1"
    assert document["scale"] == "quick"
    assert {"processor", "cores", "python", "load_1min"} <= set(document["machine"])  # type: ignore[call-overload]
    check(document, {"scan", "journal", "journal.kill"})
    assert "scan of 100 new samples" in table


@pytest.mark.slow
@pytest.mark.timeout(300)
def test_the_other_figures_are_whole(tmp_path: Path) -> None:
    document, _ = run_bench(tmp_path, "start", "plant", "dry", "nights", "replay", "trip", "live", "cards", "growth")
    of_trips = {"trip.p50", "trip.p99", "trip.worst"}
    of_growth = {f"growth.{name}" for name in ("tags", "cells", "hours", "rows", "faults")}
    of_replay = {"replay.read", "replay", "replay.rate"}
    of_cards = {"cards.modbus", "cards.text", "cards.processor"}
    rest = {"start.help", "start.check", "plant", "dry", "dry.speed", "nights", "live.processor", "live.memory"}
    assert "exponent" in (tmp_path / "bench-growth.svg").read_text(encoding="utf-8")
    check(document, of_trips | of_growth | of_replay | of_cards | rest)


DOCUMENT = {
    "machine": {"processor": "Abacus", "cores": 2, "python": "3.11", "load_1min": 0.1},
    "began_utc": "2030-01-02T03:04:05+00:00",
    "scale": "normal",
    "figures": [
        Figure("a", "a thing", "ms", 3.0, 2.0, "a plain thing", Target(ratio_max=2)).facts(),
        Figure("b", "another", "x", 1.5, target=Target(value_min=1.8)).facts(),
        not_built("c", "a third", Target(value_max=1)).facts(),
        Figure("growth.cells", "step against cells", value=1.0,
               detail={"unit": "us", "costs": {"10": 1.0, "100": 10.0}}).facts(),
    ],
}  # fmt: skip


def test_the_readme_is_refreshed_between_its_marks_with_machine_date_and_plot(tmp_path: Path) -> None:
    (tmp_path / ".readme").mkdir()
    readme = tmp_path / "README.md"
    readme.write_text(f"before\n{BEGIN}\nwhat stood there\n{END}\nafter\n", encoding="utf-8")
    (tmp_path / "b.json").write_text(json.dumps(DOCUMENT), encoding="utf-8")
    for _ in range(2):
        refresh(tmp_path / "b.json", tmp_path)
        text = readme.read_text(encoding="utf-8")
        assert text.startswith(f"before\n{BEGIN}\nAbacus, 2 cores, Python 3.11, load at the end 0.1; 2030-01-02")
        assert text.endswith(f"{END}\nafter\n")
        assert "what stood there" not in text
        assert "| a thing | 3 ms | 2 (a plain thing) | 1.5× | <= 2× | held |" in text
        assert "| another | 1.5 x |  |  | >= 1.8× | **missed** |" in text
        assert "| a third | not built yet |" in text
    assert "exponent 1.00" in (tmp_path / ".readme" / "growth.svg").read_text(encoding="utf-8")


@pytest.mark.parametrize("text", ["none", BEGIN, f"{END}{BEGIN}", f"{BEGIN}{END}{BEGIN}{END}"])
def test_a_readme_without_its_marks_is_left_as_it_is(text: str) -> None:
    with pytest.raises(ValueError, match="needs the marks"):
        put(text, "new")


def test_a_figure_that_cannot_be_measured_is_told_and_ends_with_1(tmp_path: Path) -> None:
    program = (
        "import sys; sys.path.insert(0, sys.argv[1]); from bench import board, cost_of_scan\n"
        "def broken(scale): raise OSError('no disk')\n"
        "cost_of_scan.scan_figures = broken\n"
        "sys.exit(board.main(['--only', 'scan', '--json', 'b.json']))"
    )
    command = [sys.executable, "-c", program, str(RUN.parents[1])]
    done = subprocess.run(command, cwd=tmp_path, capture_output=True, text=True, check=False)
    assert done.returncode == 1, done.stderr
    (figure,) = json.loads((tmp_path / "b.json").read_text(encoding="utf-8"))["figures"]
    assert figure["value"] is None
    assert figure["note"] == "failed: OSError: no disk"


@pytest.mark.parametrize(
    ("target", "value", "floor", "held"),
    [
        (Target(value_max=0.2), 0.2, 0.01, True),
        (Target(value_max=0.2), 0.21, 0.01, False),
        (Target(value_min=10), 9, None, False),
        (Target(ratio_max=2), 4, 2, True),
        (Target(ratio_max=2), 4.1, 2, False),
        (Target(ratio_min=0.5), 4, 10, False),
        (Target(value_max=20, ratio_max=2), 19, 1, False),
        (Target(), 19, 1, None),
    ],
)
def test_held_or_missed(target: Target, value: float, floor: float | None, held: bool | None) -> None:
    assert Figure("x", "x", "ms", value, floor, target=target).held is held


def test_what_is_not_built_has_no_number_and_no_verdict() -> None:
    figure = not_built("x", "x", Target(value_max=1))
    assert (figure.value, figure.ratio, figure.held) == (None, None, None)


def test_nearest_rank_and_slope() -> None:
    assert [quantile(range(1, 101), share) for share in (0.5, 0.99, 1)] == [50, 99, 100]
    assert exponent([1, 10, 100], [2, 20, 200]) == pytest.approx(1)
    assert exponent([1, 10, 100], [2, 200, 20_000]) == pytest.approx(2)
    assert Scale.FULL.pick(1, 2, 3) == 3
