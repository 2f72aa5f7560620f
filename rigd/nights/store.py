"""Keeps finished nights: one line of JSON each, written through at once; an interrupt costs only the unfinished.

A torn last line (power cut) is dropped and that night is done again. The Parquet table is written at the end.
"""

from __future__ import annotations

import json
import os
from collections.abc import Sequence
from pathlib import Path

from rigd.adapters.parquet_table import write_parquet
from rigd.model.errors import RigError
from rigd.nights.night import Row

LINES, TABLE = "nights.jsonl", "nights.parquet"


class NightStore:
    """The results of one campaign in one folder. Raises ``RigError`` when the folder holds another campaign."""

    def __init__(self, folder: Path, name: str, digest: str) -> None:
        self.folder = folder
        self._path = folder / LINES
        self.rows: dict[int, Row] = {}
        try:
            folder.mkdir(parents=True, exist_ok=True)
            if self._path.exists():
                self._resume(digest)
            else:
                self._write(json.dumps({"campaign": name, "digest": digest}))
        except OSError as error:
            raise _no_room(folder, error) from error

    def _resume(self, digest: str) -> None:
        whole, _, torn = self._path.read_bytes().rpartition(b"\n")
        lines = whole.decode("utf-8").splitlines()
        head = json.loads(lines[0]) if lines else {}
        if head.get("digest") != digest:
            message = f"{self.folder} holds the nights of another campaign ({head.get('campaign', 'unreadable')!r})"
            raise RigError(f"{message}, or its files have changed since; name another folder with --out")
        for line in lines[1:]:
            row = json.loads(line)
            self.rows[int(row["night"])] = row
        if torn:
            os.truncate(self._path, len(whole) + 1)

    def add(self, row: Row) -> None:
        """Keep a night. Raises ``RigError`` when it cannot be written; what was kept before stays."""
        try:
            self._write(json.dumps(row, ensure_ascii=False))
        except OSError as error:
            raise _no_room(self.folder, error) from error
        self.rows[int(row["night"])] = row

    def _write(self, line: str) -> None:
        size = self._path.stat().st_size if self._path.exists() else 0
        try:
            with self._path.open("ab") as file:
                file.write(line.encode("utf-8") + b"\n")
                file.flush()
                os.fsync(file.fileno())
        except OSError:
            if self._path.exists():
                os.truncate(self._path, size)
            raise

    def in_order(self) -> list[Row]:
        """All rows by night."""
        return [self.rows[night] for night in sorted(self.rows)]

    def write_table(self) -> Path:
        """Parquet, one row a night. Raises ``RigError`` without pyarrow."""
        return write_parquet(self.folder / TABLE, _columns(self.in_order()))


def _columns(rows: Sequence[Row]) -> dict[str, list[object]]:
    names = list(dict.fromkeys(name for row in rows for name in row))
    return {name: [row.get(name) for row in rows] for name in names}


def _no_room(folder: Path, error: OSError) -> RigError:
    reason = error.strerror or str(error)
    return RigError(f"cannot keep nights in {folder}: {reason}; free some room or name another folder with --out")
