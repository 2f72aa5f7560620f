"""A run as its journal holds it, made ready to be decided again: the files it was run with become a program."""

from __future__ import annotations

import json
import tempfile
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass, fields
from pathlib import Path

from rigd import __version__
from rigd.adapters import run_folder
from rigd.adapters.build import core_digest
from rigd.adapters.journal_reader import JournalReader
from rigd.config.load import load_pair
from rigd.logic.program import Program, RunOptions, compile_program
from rigd.model.errors import ConfigError, JournalError
from rigd.model.problems import Problem
from rigd.runtime.calibrated import calibrated_rig, corrections_of

RIG, CHEMISTRY, RECIPE = run_folder.RIG, run_folder.CHEMISTRY, run_folder.RECIPE
FILES = (RIG, CHEMISTRY, RECIPE)


@dataclass(frozen=True, slots=True)
class Recorded:
    """What a journal was recorded with. ``notes`` are sentences about why a replay may differ."""

    program: Program
    meta: Mapping[str, str]
    notes: tuple[str, ...] = ()


def recorded_run(journal: JournalReader) -> Recorded:
    """The program of a run, from the texts in its journal. ``JournalError`` says why when it cannot be made."""
    meta = journal.meta
    with _temporary_files(journal) as folder:
        try:
            pair = load_pair(folder / RIG, folder / RECIPE)
        except ConfigError as error:
            raise JournalError(_unread(journal, error.problems)) from error
    assert pair.recipe is not None
    notes = _notes(meta, (pair.rig.digest, pair.recipe.digest))
    rig = calibrated_rig(pair.rig, corrections_of(meta.get("calibrations", "")))
    return Recorded(compile_program(rig, pair.recipe, _options_of(journal)), meta, notes)


@contextmanager
def _temporary_files(journal: JournalReader) -> Iterator[Path]:
    """A folder with the files of the run, removed at the end."""
    with tempfile.TemporaryDirectory(prefix="rigd-replay-") as folder:
        run_folder.write_texts(Path(folder), _texts_of(journal))
        yield Path(folder)


def _texts_of(journal: JournalReader) -> dict[str, str]:
    """Rig, chemistry, recipe and cards of the run: those in the journal, else the copies beside it."""
    texts = run_folder.texts_in(journal.meta)
    if any(name not in texts for name in FILES):
        texts = {**run_folder.kept_texts(journal.path.parent), **texts}
    missing = [name for name in FILES if name not in texts]
    if missing:
        raise JournalError(
            f"{journal.path} holds no {missing[0]} and there is no copy beside it: it was recorded by a version of rigd"
            " that did not store the files of a run, and cannot be decided again; its data can be read and exported"
        )
    return texts


def _options_of(journal: JournalReader) -> RunOptions:
    """The options of the run. ``JournalError`` when this version does not know one of them."""
    text = journal.meta.get("options")
    if text is None:
        raise JournalError(
            f"{journal.path} does not tell the options of its run (floors, points already collected): it was recorded "
            "by a version of rigd that did not store them, and cannot be decided again; its data can be exported"
        )
    known = {one.name for one in fields(RunOptions)}
    try:
        given = dict(json.loads(text))
        if unknown := sorted(given.keys() - known):
            raise JournalError(f"{journal.path} was run with the option {unknown[0]!r}, which rigd {__version__} lacks")
        return RunOptions(**{**given, **{name: tuple(given.get(name, ())) for name in ("collected", "overdue")}})
    except (ValueError, TypeError) as error:
        raise JournalError(f"{journal.path} is damaged: its options are {text!r}") from error


def _notes(meta: Mapping[str, str], digests: tuple[str, str]) -> tuple[str, ...]:
    found = []
    if (version := meta.get("version", "unknown")) != __version__:
        found.append(f"recorded by rigd {version}, decided again by rigd {__version__}: differences may come from that")
    elif meta.get("core", "") not in ("", core_digest()):
        found.append(f"recorded by another build of rigd {version}: differences may come from that")
    for what, digest in zip(("rig", "recipe"), digests, strict=True):
        if meta.get(f"{what}_digest", digest) != digest:
            found.append(f"this version reads the run's {what} file differently: its digest is another one")
    return tuple(found)


def _unread(journal: JournalReader, problems: tuple[Problem, ...]) -> str:
    first = problems[0]
    place = f"{Path(first.file).name}:{first.line}"
    return (
        f"rigd {__version__} cannot read the files with which {journal.path} was recorded (by rigd "
        f"{journal.meta.get('version', 'unknown')}): {place}: {first.message}"
    )
