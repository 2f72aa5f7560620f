"""The chain of hashes over a run journal: what it covers, and how it is made.

Each record of the table ``audit`` is one line of JSON, and ``hash`` is H(n) = SHA-256(H(n-1) || the bytes of the line),
H(0) being 32 zero bytes. The first record of a file (``begin``) holds the digest of every fact and of the tag list;
``audit`` records tell who did what, with both clocks; a ``seal`` comes with each transaction that is forced to the disk
(at least one a second, and each with an order or event) and holds, for every table, how many rows were written since
the last one and their digest, so that no row can be changed, dropped, added or moved unseen; ``end`` comes with the
outcome. A chain does not show that its tail was cut, or that everything was written anew by somebody
who can write the file: therefore its head leaves the computer with each alert and is printed at the end.
Literature: Haber & Stornetta, J. Cryptology 3 (1991) 99; Schneier & Kelsey, ACM TISSEC 2 (1999) 159 (from memory).
"""

from __future__ import annotations

import hashlib
import json
import math
import struct
from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from itertools import starmap
from pathlib import Path
from typing import Any

from rigd.adapters import journal_schema as schema
from rigd.model.events import EventKind

START = bytes(32)
"""H(0)."""

COLUMNS = {
    "scans": "iit",
    "samples": "iiifiio",
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


def encoded(table: str, rows: Sequence[schema.Row]) -> bytes:
    """Rows of a table as bytes, row after row; equal for rows as they were written and as they are read."""
    if table == "samples":
        return _samples(rows)
    kinds = COLUMNS[table]
    return b"".join([_BYTES_OF[kind](value) for row in rows for kind, value in zip(kinds, row, strict=True)])


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


def _text(value: str) -> bytes:
    return _blob(value.encode(errors="surrogatepass"))


def _blob(value: bytes) -> bytes:
    return _integer(len(value)) + value


def _number(value: float) -> bytes:
    """A zero has no sign in SQLite."""
    return _float(value + 0.0)


_integer = struct.Struct("<q").pack
_float = struct.Struct("<d").pack
_BYTES_OF: dict[str, Callable[[Any], bytes]] = {"i": _integer, "f": _number, "t": _text, "b": _blob}


@dataclass(slots=True)
class _Unsealed:
    """What was written since the last seal."""

    tables: dict[str, tuple[int, Any]] = field(default_factory=dict)
    meta: dict[str, str] = field(default_factory=dict)

    def copy(self) -> _Unsealed:
        return _Unsealed({name: (count, whole.copy()) for name, (count, whole) in self.tables.items()}, dict(self.meta))

    def add(self, table: str, rows: Sequence[schema.Row]) -> None:
        count, whole = self.tables.get(table) or (0, hashlib.sha256())
        whole.update(encoded(table, rows))
        self.tables[table] = (count + len(rows), whole)


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
        self._kept_unsealed = self._unsealed = _Unsealed()
        self._utc, self._now_ns = "", 0
        self._step = ""

    @property
    def head(self) -> tuple[int, str]:
        """Number and hash of the last record that is in the file."""
        return self._kept[1], self._kept[0].hex()

    def keep(self) -> None:
        """The transaction was committed."""
        self._kept, self._kept_unsealed = (self._head, self._seq), self._unsealed

    def begin(self, segment: int, meta: Iterable[tuple[str, str]], tags: Sequence[schema.Row]) -> list[schema.Row]:
        """The first record of a file."""
        self._head, self._seq = self._kept
        self._unsealed = _Unsealed()
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

    def extend(self, rows: Iterable[tuple[str, list[schema.Row]]], *, seal: bool) -> list[schema.Row]:
        """The records of a transaction: what people and protection did, and with ``seal`` a seal over all rows since
        the last one."""
        self._head, self._seq = self._kept
        self._unsealed = unsealed = self._kept_unsealed.copy()
        found: list[schema.Row] = []
        for statement, values in rows:
            if statement == schema.INSERT_META:
                unsealed.meta |= dict(values)
            elif values:
                table = _TABLE_OF[statement]
                unsealed.add(table, values)
                if table == "scans":
                    _, self._now_ns, self._utc = values[-1]
                elif table == "events":
                    found += [self._record(body) for row in values if (body := self._deed(row)) is not None]
        return [*found, *self._seal(unsealed)] if seal or unsealed.meta else found

    def _seal(self, unsealed: _Unsealed) -> list[schema.Row]:
        self._unsealed = _Unsealed()
        tables = {table: [count, whole.hexdigest()] for table, (count, whole) in unsealed.tables.items()}
        clocks = {"utc": self._utc, "t_ns": self._now_ns, "mono_ns": self._mono_ns(self._now_ns)}
        body: dict[str, object] = {"kind": "seal", **clocks, "rows": tables}
        if unsealed.meta:
            body["meta"] = {key: text_digest(value) for key, value in unsealed.meta.items()}
        found = [self._record(body)]
        if "outcome" in unsealed.meta:
            outcome = unsealed.meta["outcome"]
            found.append(self._record({"kind": "end", **clocks, "outcome": outcome, **self._always}))
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
            "mono_ns": self._mono_ns(t_ns),
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

    def _mono_ns(self, t_ns: int) -> int:
        """The computer's own monotonic clock at a process time."""
        return self._origin_ns + round(t_ns / self._pace)

    def _record(self, body: Mapping[str, object]) -> schema.Row:
        self._seq += 1
        line = schema.compact({"seq": self._seq, **body})
        self._head = linked(self._head, line.encode(errors="surrogatepass"))
        return (self._seq, line, self._head.hex())
