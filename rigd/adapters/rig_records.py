"""The record of a rig between runs: one line of JSON per entry beside the rig file, ``<rig file>.records.jsonl``.

Append only, forced to the disk, and chained like a run's journal: each line holds H(n) = SHA-256(H(n-1) || the line
without its hash). A last line that was torn by a power cut is passed over; anything else that does not fit the chain is
a ``JournalError``.
"""

from __future__ import annotations

import json
import os
from dataclasses import asdict
from pathlib import Path

from rigd.adapters.journal_chain import START, linked
from rigd.model.errors import JournalError
from rigd.model.records import RecordKind, RigRecord


def records_path(rig_path: Path) -> Path:
    """Where the record of a rig stands."""
    return rig_path.with_suffix(".records.jsonl")


def read_records(rig_path: Path) -> tuple[RigRecord, ...]:
    """All entries, oldest first; none when there is no file. ``JournalError`` when a line is not as it was written."""
    return tuple(record for record, _ in _read(records_path(rig_path)))


def append_record(rig_path: Path, record: RigRecord) -> Path:
    """Add an entry and wait until it is on the disk; returns the file. ``JournalError`` when that is not possible."""
    path = records_path(rig_path)
    before = _read(path)
    head = before[-1][1] if before else START
    body = json.dumps({"n": len(before) + 1, **asdict(record)}, ensure_ascii=False)
    line = json.dumps({"hash": linked(head, body.encode()).hex(), "entry": body}, ensure_ascii=False)
    try:
        torn = path.is_file() and not path.read_bytes().endswith(b"\n") and path.stat().st_size > 0
        with path.open("a", encoding="utf-8") as file:
            file.write(("\n" if torn else "") + line + "\n")
            file.flush()
            os.fsync(file.fileno())
    except OSError as error:
        raise JournalError(f"cannot write {path}: {error.strerror}") from error
    return path


def _read(path: Path) -> list[tuple[RigRecord, bytes]]:
    try:
        lines = path.read_text(encoding="utf-8").split("\n")
    except FileNotFoundError:
        return []
    except (OSError, UnicodeDecodeError) as error:
        raise JournalError(f"cannot read {path}: {error}") from error
    found: list[tuple[RigRecord, bytes]] = []
    head = START
    for number, line in enumerate(lines, 1):
        if not line:
            continue
        try:
            told = json.loads(line)
            entry, own = told["entry"], told["hash"]
        except (ValueError, TypeError, KeyError):
            continue  # torn; if it was a whole line once, the next one does not fit
        head = linked(head, str(entry).encode())
        if head.hex() != own:
            raise JournalError(
                f"{path}:{number}: this entry or one before it is not what was written; ask who changed it"
            )
        found.append((_record(path, number, entry, len(found) + 1), head))
    return found


def _record(path: Path, number: int, entry: str, expected: int) -> RigRecord:
    try:
        body = dict(json.loads(entry))
        if body.pop("n") != expected:
            raise ValueError("an entry is missing")
        return RigRecord(**{**body, "kind": RecordKind(body["kind"])})
    except (ValueError, TypeError, KeyError) as error:
        raise JournalError(f"{path}:{number}: {error}") from error
