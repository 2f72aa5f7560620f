"""Records that are cut, damaged, of another version or another rig, and disks that are full: each command says so in
one sentence, exits with 2, and leaves what was there as it was."""

from __future__ import annotations

import json
import random
import resource
import shutil
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path

import pytest
from fakes.recorded import BLOCK, CONFIGS, RECIPE, RIG, copy_of, recorded, spoilt

from rigd.console.cli import call


def sql(*statements: str) -> Callable[[Path], None]:
    def spoil(run: Path) -> None:
        with spoilt(run) as tables:
            for statement in statements:
                tables.execute(statement)

    return spoil


def cut(run: Path) -> None:
    whole = (run / "run.sqlite").read_bytes()
    (run / "run.sqlite").write_bytes(whole[: len(whole) // 2])


def a_page_of_nonsense(run: Path) -> None:
    file = run / "run.sqlite"
    content = bytearray(file.read_bytes())
    middle = len(content) // 2
    content[middle : middle + 8192] = bytes(byte ^ 0x5A for byte in content[middle : middle + 8192])
    file.write_bytes(content)


def flipped_bytes(run: Path) -> None:
    file, chance = run / "run.sqlite", random.Random(1)
    content = bytearray(file.read_bytes())
    for _ in range(400):
        content[chance.randrange(20_000, len(content))] ^= 0xFF
    file.write_bytes(content)


def empty(run: Path) -> None:
    (run / "run.sqlite").write_bytes(b"")


SPOIL: dict[str, tuple[Callable[[Path], None], str]] = {
    "cut": (cut, "malformed"),
    "a page": (a_page_of_nonsense, "malformed"),
    "bytes": (flipped_bytes, "run journal"),
    "empty": (empty, "no table of facts"),
    "another file": (sql("DROP TABLE meta"), "no table of facts"),
    "version 0": (sql("UPDATE meta SET value = '0' WHERE key = 'schema'"), "its schema is version 0, this program"),
    "version 99": (sql("UPDATE meta SET value = '99' WHERE key = 'schema'"), "its schema is version 99, this program"),
    "no version": (sql("DELETE FROM meta WHERE key = 'schema'"), "its schema is version none"),
    "an event": (sql("UPDATE events SET kind = 'blob' WHERE rowid = 5"), "'blob' is not a valid EventKind"),
    "fields": (sql("UPDATE events SET fields = '{' WHERE rowid = 5"), "is damaged"),
    "labels": (sql("UPDATE tags SET labels = '[' WHERE id = 5"), "run journal"),
}
COMMANDS: dict[str, Callable[[Path, Path], list[str]]] = {
    "replay": lambda run, _: ["replay", str(run)],
    "watch": lambda run, _: ["replay", str(run), "--watch"],
    "what if": lambda run, _: ["replay", str(run), "--with", str(RIG)],
    "report": lambda run, _: ["report", str(run)],
    "csv": lambda run, out: ["export", str(run), "--out", str(out)],
    "parquet": lambda run, out: ["export", str(run), "--parquet", "--out", str(out)],
}


def files(folder: Path) -> dict[str, bytes]:
    return {path.name: path.read_bytes() for path in folder.glob("*")}


@pytest.mark.parametrize("how", SPOIL)
def test_a_spoilt_record_is_a_sentence_and_nothing_is_written(how, tmp_path, capsys):
    spoil, words = SPOIL[how]
    run, out = copy_of(recorded(BLOCK), tmp_path), tmp_path / "out"
    spoil(run)
    before = files(run)
    for name, command in COMMANDS.items():
        assert call(command(run, out)) == 2, name
        told = capsys.readouterr().err
        assert words in " ".join(told.split()), name
        assert "Traceback" not in told, name
        assert "bug report" not in told, name
        assert files(run) == before, name
        assert not out.exists() or not files(out), name
    assert call(["runs", "--runs", str(tmp_path), "--json"]) == 0
    assert json.loads(capsys.readouterr().out)["runs"][0]["run"] == run.name
    assert call(["runs", "verify", str(run)]) in (1, 2)
    assert "Traceback" not in capsys.readouterr().err


@pytest.mark.parametrize("how", ["cut", "version 99"])
def test_a_spoilt_record_is_not_gone_on_with(how, tmp_path, capsys):
    run = copy_of(recorded(BLOCK), tmp_path)
    SPOIL[how][0](run)
    runs = tmp_path / "runs"
    assert call(["run", str(RIG), str(RECIPE), "--resume", str(run), "--runs", str(runs)]) == 2
    assert SPOIL[how][1] in " ".join(capsys.readouterr().err.split())
    assert not runs.exists()


def test_a_record_without_a_scan_says_so(tmp_path, capsys):
    run = copy_of(recorded(BLOCK), tmp_path)
    sql(*(f"DELETE FROM {table}" for table in ("scans", "samples", "orders", "events", "inputs")))(run)
    for name in ("replay", "watch", "what if"):
        assert call(COMMANDS[name](run, tmp_path)) == 2
        assert "holds no scan" in " ".join(capsys.readouterr().err.split())


def without_a_third(folder: Path) -> Path:
    run = copy_of(recorded(BLOCK), folder)
    sql("UPDATE samples SET value = NULL WHERE rowid % 3 = 0")(run)
    return run


def test_data_that_are_no_numbers_are_gaps_and_no_trouble(tmp_path, capsys):
    """What never was NaN when it was recorded is a difference to a replay; the rest shows a gap."""
    run, out = without_a_third(tmp_path), tmp_path / "out"
    assert call(COMMANDS["replay"](run, out)) == 1
    for name in ("watch", "csv", "parquet"):
        assert call([*COMMANDS[name](run, out), "--json"]) == 0
        assert "Traceback" not in capsys.readouterr().err


@pytest.mark.slow
def test_data_that_are_no_numbers_are_gaps_in_the_report_and_to_a_what_if(tmp_path, capsys):
    run = without_a_third(tmp_path)
    assert call(["report", str(run), "--json"]) == 0
    assert json.loads(capsys.readouterr().out)["peak"]["PT-1"] > 2
    assert call(COMMANDS["what if"](run, tmp_path)) == 1
    assert "Traceback" not in capsys.readouterr().err


@pytest.mark.parametrize(
    ("other", "words"), [("one-pump.toml", "another rig"), ("three-pump-two-columns.toml", "unit")]
)
def test_a_what_if_with_another_rig_is_refused(other, words, capsys):
    assert call(["replay", str(recorded(BLOCK)), "--with", str(CONFIGS / "rigs" / other)]) == 2
    assert words in " ".join(capsys.readouterr().err.split())


@contextmanager
def room(size_bytes: int) -> Iterator[None]:
    """No file may grow beyond this size, as on a full disk."""
    before = resource.getrlimit(resource.RLIMIT_FSIZE)
    resource.setrlimit(resource.RLIMIT_FSIZE, (size_bytes, before[1]))
    try:
        yield
    finally:
        resource.setrlimit(resource.RLIMIT_FSIZE, before)


@pytest.mark.parametrize(
    ("name", "size_bytes"),
    [
        pytest.param("report", 40_000, marks=pytest.mark.slow),  # the page is larger, the run's own files are not
        ("csv", 1_000),
        ("parquet", 1_000),
    ],
)
def test_without_room_nothing_half_written_is_left(name, size_bytes, tmp_path, capsys):
    run, out = copy_of(recorded(BLOCK), tmp_path), tmp_path / "out"
    for folder in (run, out):
        folder.mkdir(exist_ok=True)
        for file in ("report.html", "samples.csv", "events.parquet"):
            (folder / file).write_text("an older one")
    before = files(run), files(out)
    with room(size_bytes):
        assert call(COMMANDS[name](run, out)) == 2
    assert "bug report" not in capsys.readouterr().err
    assert (files(run), files(out)) == before


def test_without_room_a_rehearsal_leaves_no_record(tmp_path, capsys):
    out = tmp_path / "out"
    with room(30_000):
        assert call(["dry-run", str(RIG), str(RECIPE), "--fault", "block@L-4,at=2 s", "--out", str(out)]) == 2
    assert "cannot write the journal" in " ".join(capsys.readouterr().err.split())
    assert not out.exists()


def test_a_record_in_a_folder_that_cannot_be_written_can_be_read(tmp_path, capsys, monkeypatch):
    """A folder where a file can be neither made nor renamed, as on an archive's disc."""
    run = copy_of(recorded(BLOCK), tmp_path)

    def refuse(path: Path, *_: object, **__: object) -> None:
        raise OSError(30, "Read-only file system", str(path))

    with monkeypatch.context() as patch:
        patch.setattr(Path, "write_text", refuse)
        assert call(["report", str(run)]) == 2
    told = " ".join(capsys.readouterr().err.split())
    assert "Read-only file system" in told
    assert "--out" in told
    (tmp_path / "file").write_text("")
    assert call(["export", str(run), "--out", str(tmp_path / "file" / "x")]) == 2
    shutil.rmtree(run)
    assert call(["replay", str(run)]) == 2
