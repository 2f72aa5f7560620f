"""The chain of hashes over a run journal: what it covers, and how it is made.

Each record of the table ``audit`` is one line of JSON, and ``hash`` is H(n) = SHA-256(H(n-1) || the bytes of the line),
H(0) being 32 zero bytes. The first record of a file (``begin``) holds the digest of every fact and of the tag list;
``audit`` records tell who did what, with both clocks; a ``seal`` ends each transaction and holds the number of rows and
their digest for every table that it wrote to, so that no row can be changed, dropped, added or moved unseen; ``end``
comes with the outcome. A chain does not show that its tail was cut, or that everything was written anew by somebody
who can write the file: therefore its head leaves the computer with each alert and is printed at the end.
Literature: Haber & Stornetta, J. Cryptology 3 (1991) 99; Schneier & Kelsey, ACM TISSEC 2 (1999) 159 (from memory).
"""

from __future__ import annotations

import hashlib
import json
import math
import struct
import sys
from array import array
from collections.abc import Iterable, Mapping, Sequence
from itertools import starmap
from pathlib import Path
from typing import Any

from rigd.adapters import journal_schema as schema
from rigd.model.events import EventKind

START = bytes(32)
"""H(0)."""

COLUMNS = {
    "scans": "iit",
    "samples": "iiifiio",  # packed row by row: there are so many of them
    "inputs": "itt",
    "orders": "iittfiti",
    "events": "ittitt",
    "spectra": "tiffb",
    "bytes": "tiib",
}
"""Tables that the chain covers and their columns: i integer, f number, t text, b bytes; o integer or nothing."""

_TABLE_OF = {
    schema.INSERT_SCAN: "scans",
    schema.INSERT_SAMPLE: "samples",
    schema.INSERT_INPUT: "inputs",
    schema.INSERT_ORDER: "orders",
    schema.INSERT_EVENT: "events",
    schema.INSERT_SPECTRUM: "spectra",
    schema.INSERT_BYTES: "bytes",
}
_NOTHING = -(1 << 63)
_SYNCHRONISED = Path("/run/systemd/timesync/synchronized")

_AUDITED = {
    EventKind.REQUEST.value,
    EventKind.TRIP.value,
    EventKind.INTERLOCK.value,
    EventKind.ALARM.value,
    EventKind.STOP.value,
    EventKind.RUN_STATE.value,
    EventKind.PROMPT.value,
    EventKind.FAULT.value,
}


def linked(previous: bytes, record: bytes) -> bytes:
    """H(n) from H(n-1) and the bytes of record n."""
    return hashlib.sha256(previous + record).digest()


def digest(table: str, rows: Sequence[schema.Row]) -> str:
    """SHA-256 over rows of a table; equal for rows as they were written and as they are read."""
    whole = hashlib.sha256(f"{table} {len(rows)}\n".encode())
    if table == "samples":
        whole.update(_samples(rows))
        return whole.hexdigest()
    for kind, column in zip(COLUMNS[table], zip(*rows, strict=True), strict=True):
        whole.update(_BYTES_OF[kind](column))
    return whole.hexdigest()


def text_digest(text: str) -> str:
    """SHA-256 of a text."""
    return hashlib.sha256(text.encode(errors="surrogatepass")).hexdigest()


_PACK = struct.Struct("<qqqdBBq").pack


def _samples(rows: Sequence[schema.Row]) -> bytes:
    """Rows of samples, packed; most have no gaps and are packed without being looked at."""
    try:
        return b"".join(starmap(_PACK, rows))
    except struct.error:
        return b"".join(
            [
                _PACK(
                    scan,
                    tag,
                    t_ns,
                    math.nan if value is None else value,
                    quality,
                    cause,
                    _NOTHING if raw is None else raw,
                )
                for scan, tag, t_ns, value, quality, cause, raw in rows
            ]
        )


def _native(numbers: array[Any]) -> bytes:
    if sys.byteorder == "big":
        numbers.byteswap()
    return numbers.tobytes()


def _integers(column: Sequence[Any]) -> bytes:
    return _native(array("q", column))


def _numbers(column: Sequence[Any]) -> bytes:
    return _native(array("d", [value if value is not None and value == value else math.nan for value in column]))


def _texts(column: Sequence[Any]) -> bytes:
    return _blobs([value.encode(errors="surrogatepass") for value in column])


def _blobs(column: Sequence[Any]) -> bytes:
    return _integers([len(value) for value in column]) + b"".join(column)


_BYTES_OF = {"i": _integers, "f": _numbers, "t": _texts, "b": _blobs}


class Chain:
    """The writer's half. What ``begin`` and ``extend`` return is written in the transaction that it describes, and
    counts from ``keep`` on; without it, the next call starts again from the last head that was kept."""

    def __init__(self, meta: Mapping[str, str]) -> None:
        self._meta = meta
        self._origin_ns = int(meta.get("origin_monotonic_ns", "0"))
        self._pace = float(meta.get("pace", "1"))
        self._always = {
            "boot": meta.get("boot_id", ""),
            "run": meta.get("run", ""),
            "config": f"{meta.get('rig_digest', '')[:16]} {meta.get('recipe_digest', '')[:16]}",
            "version": meta.get("version", ""),
        }
        self._kept = (START, 0)
        self._head, self._seq = self._kept
        self._utc = ""
        self._step = ""

    @property
    def head(self) -> tuple[int, str]:
        """Number and hash of the last record that is in the file."""
        return self._kept[1], self._kept[0].hex()

    def keep(self) -> None:
        """The transaction was committed."""
        self._kept = (self._head, self._seq)

    def begin(self, segment: int, meta: Iterable[tuple[str, str]], tags: Sequence[schema.Row]) -> list[schema.Row]:
        """The first record of a file."""
        self._head, self._seq = self._kept
        body = {
            "kind": "begin",
            "segment": segment,
            "previous": self._head.hex(),
            "utc": self._meta.get("started_utc", ""),
            "clock": "synchronised" if _SYNCHRONISED.exists() else "unknown",
            "mono_ns": self._origin_ns,
            **self._always,
            "meta": {key: text_digest(value) for key, value in meta},
            "tags": text_digest(schema.compact([list(row) for row in tags])),
        }
        return [self._record(body)]

    def extend(self, rows: Iterable[tuple[str, list[schema.Row]]]) -> list[schema.Row]:
        """The records of a transaction: what people and protection did, then the seal."""
        self._head, self._seq = self._kept
        found: list[schema.Row] = []
        sealed: dict[str, object] = {}
        meta: dict[str, str] = {}
        for statement, values in rows:
            if statement == schema.INSERT_META:
                meta |= dict(values)
                continue
            if not values:
                continue
            table = _TABLE_OF[statement]
            sealed[table] = [len(values), digest(table, values)]
            if table == "scans":
                self._utc = values[-1][2]
            elif table == "events":
                found += [self._record(body) for row in values if (body := self._deed(row)) is not None]
        seal = {"kind": "seal", "utc": self._utc, "rows": sealed}
        if meta:
            seal["meta"] = {key: text_digest(value) for key, value in meta.items()}
        found.append(self._record(seal))
        if "outcome" in meta:
            found.append(self._record({"kind": "end", "utc": self._utc, "outcome": meta["outcome"], **self._always}))
        return found

    def _deed(self, row: schema.Row) -> dict[str, object] | None:
        """Who did what to what, why, and with what result; ``None`` for an event that is sealed only."""
        scan, kind, subject, t_ns, text, fields_text = row
        if kind == EventKind.PHASE.value:
            self._step = subject
        if kind not in _AUDITED:
            return None
        fields = json.loads(fields_text)
        request = kind == EventKind.REQUEST.value
        actor = str(fields.get("who") or fields.get("by") or "")
        return {
            "kind": "audit",
            "scan": scan,
            "t_ns": t_ns,
            "mono_ns": self._origin_ns + round(t_ns / self._pace),
            "utc": self._utc,
            "actor": actor or "rigd",
            "authenticated": "user of this computer" if actor else "part of rigd",
            "action": subject if request else str(fields.get("event") or kind),
            "object": str(fields.get("target", "")) if request else subject,
            "old": fields.get("from", ""),
            "new": fields.get("state", fields.get("did", subject if kind == EventKind.RUN_STATE.value else "")),
            "value": fields.get("value", ""),
            "unit": fields.get("unit", ""),
            "reason": str(fields.get("reason") or fields.get("cause") or fields.get("detail") or ""),
            "result": fields.get("result", fields.get("status", "")),
            "text": text,
            "step": self._step,
            **self._always,
        }

    def _record(self, body: Mapping[str, object]) -> schema.Row:
        self._seq += 1
        line = schema.compact({"seq": self._seq, **body})
        self._head = linked(self._head, line.encode(errors="surrogatepass"))
        return (self._seq, line, self._head.hex())
