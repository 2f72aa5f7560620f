"""The tables of a run journal (schema version 1) and how values become rows and come back, exactly.

A run is ``run.sqlite`` in the run folder, or several segments (``run.2.sqlite`` ...) when the disk failed in between.
Process time is monotonic from the start of the run; each scan also holds the wall time in UTC; ``meta`` holds the
origin on the computer's own monotonic clock. NaN is stored as NULL. Rows stand in the order
of arrival. The table ``audit`` is the chain of hashes over the others (``rigd.adapters.journal_chain``). The table
``minutes`` and the views ``readings`` and ``overview`` are for reading and not part of the chain. A replay needs none
of these, and journals of version 1 from before they came lack them.
"""

from __future__ import annotations

import json
import math
from array import array
from collections.abc import Mapping, Sequence
from typing import Any

from rigd.model.devices import DeviceIdentity, DeviceStatus, LinkState
from rigd.model.events import Event, EventKind
from rigd.model.intake import Intake
from rigd.model.orders import Action, Authority, Order, Outcome, Request, Result, Verb
from rigd.model.samples import Quality, QualityCause, Sample, Spectrum

SCHEMA = 1

TABLES = """
CREATE TABLE IF NOT EXISTS meta (key TEXT PRIMARY KEY, value TEXT NOT NULL) STRICT;
CREATE TABLE IF NOT EXISTS tags (id INTEGER PRIMARY KEY, tag TEXT UNIQUE NOT NULL, title TEXT NOT NULL,
    kind TEXT NOT NULL, measures TEXT NOT NULL, unit TEXT NOT NULL, low REAL, high REAL, labels TEXT NOT NULL) STRICT;
CREATE TABLE IF NOT EXISTS scans (number INTEGER PRIMARY KEY, now_ns INTEGER NOT NULL, utc TEXT NOT NULL) STRICT;
CREATE TABLE IF NOT EXISTS samples (scan INTEGER NOT NULL, tag INTEGER NOT NULL, t_ns INTEGER NOT NULL, value REAL,
    quality INTEGER NOT NULL, cause INTEGER NOT NULL, raw INTEGER) STRICT;
CREATE TABLE IF NOT EXISTS inputs (scan INTEGER NOT NULL, kind TEXT NOT NULL, body TEXT NOT NULL) STRICT;
CREATE TABLE IF NOT EXISTS orders (number INTEGER NOT NULL, scan INTEGER NOT NULL, unit TEXT NOT NULL,
    action TEXT NOT NULL, value REAL, authority INTEGER NOT NULL, source TEXT NOT NULL, t_ns INTEGER NOT NULL) STRICT;
CREATE TABLE IF NOT EXISTS events (scan INTEGER NOT NULL, kind TEXT NOT NULL, subject TEXT NOT NULL,
    t_ns INTEGER NOT NULL, text TEXT NOT NULL, fields TEXT NOT NULL) STRICT;
CREATE TABLE IF NOT EXISTS spectra (source TEXT NOT NULL, t_ns INTEGER NOT NULL, start_per_cm REAL NOT NULL,
    step_per_cm REAL NOT NULL, absorbance BLOB NOT NULL) STRICT;
CREATE TABLE IF NOT EXISTS bytes (link TEXT NOT NULL, t_ns INTEGER NOT NULL, sent INTEGER NOT NULL,
    data BLOB NOT NULL) STRICT;
CREATE TABLE IF NOT EXISTS audit (seq INTEGER PRIMARY KEY, body TEXT NOT NULL, hash TEXT NOT NULL) STRICT;
CREATE TABLE IF NOT EXISTS minutes (tag INTEGER NOT NULL, minute INTEGER NOT NULL, number INTEGER NOT NULL, low REAL,
    high REAL, mean REAL, worst INTEGER NOT NULL, PRIMARY KEY (tag, minute)) STRICT, WITHOUT ROWID;
CREATE VIEW IF NOT EXISTS readings AS SELECT samples.t_ns / 1e9 AS t_s, tags.tag AS tag, samples.value AS value,
    tags.unit AS unit, samples.quality AS quality FROM samples JOIN tags ON tags.id = samples.tag;
CREATE VIEW IF NOT EXISTS overview AS SELECT minutes.minute * 60 AS t_s, tags.tag AS tag, minutes.low AS low,
    minutes.mean AS mean, minutes.high AS high, tags.unit AS unit, minutes.number AS number, minutes.worst AS worst
    FROM minutes JOIN tags ON tags.id = minutes.tag;
"""

CAUSES = tuple(QualityCause)
"""A cause is stored as its index here: new causes may only be added at the end."""
QUALITIES = tuple(Quality)
_CAUSE_NUMBER = {cause: number for number, cause in enumerate(CAUSES)}

INSERT_META = "INSERT OR REPLACE INTO meta VALUES (?, ?)"
INSERT_TAG = "INSERT OR IGNORE INTO tags VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?)"
INSERT_SCAN = "INSERT INTO scans VALUES (?, ?, ?)"
INSERT_SAMPLE = "INSERT INTO samples VALUES (?, ?, ?, ?, ?, ?, ?)"
INSERT_INPUT = "INSERT INTO inputs VALUES (?, ?, ?)"
INSERT_ORDER = "INSERT INTO orders VALUES (?, ?, ?, ?, ?, ?, ?, ?)"
INSERT_EVENT = "INSERT INTO events VALUES (?, ?, ?, ?, ?, ?)"
INSERT_SPECTRUM = "INSERT INTO spectra VALUES (?, ?, ?, ?, ?)"
INSERT_BYTES = "INSERT INTO bytes VALUES (?, ?, ?, ?)"
INSERT_AUDIT = "INSERT INTO audit VALUES (?, ?, ?)"

Row = tuple[Any, ...]


def compact(value: object) -> str:
    """JSON without blanks; keys keep their order so that a replay compares equal."""
    return json.dumps(value, ensure_ascii=False, separators=(",", ":"))


def sample_row(scan: int, tag_id: int, sample: Sample) -> Row:
    """One row of ``samples``."""
    quality, cause = int(sample.quality), _CAUSE_NUMBER[sample.cause]
    return (scan, tag_id, sample.t_ns, sample.value, quality, cause, sample.raw)


def sample_rows(scan: int, tag_ids: Mapping[str, int], samples: Sequence[Sample]) -> list[Row]:
    """The rows of ``samples`` of one scan; ``tag_ids`` are those of the file."""
    cause_number = _CAUSE_NUMBER
    return [
        (
            scan,
            tag_ids[one.tag],
            one.t_ns,
            value + 0.0 if (value := one.value) == value else None,  # SQLite keeps no sign of a zero
            int(one.quality),
            cause_number[one.cause],
            one.raw,
        )
        for one in samples
    ]


def sample_of(tag: str, t_ns: int, value: float | None, quality: int, cause: int, raw: int | None) -> Sample:
    """The sample in a row of ``samples``."""
    return Sample(tag, math.nan if value is None else value, t_ns, QUALITIES[quality], CAUSES[cause], raw)


def input_rows(scan: int, intake: Intake) -> list[Row]:
    """Everything of an intake but its samples, as rows of ``inputs``."""
    rows = [(scan, "outcome", compact(_outcome(outcome))) for outcome in intake.outcomes]
    rows += [(scan, "link", compact(_status(status))) for status in intake.links]
    rows += [(scan, "request", compact(_request(request))) for request in intake.requests]
    rows += [(scan, "fault", compact(fault)) for fault in intake.faults]
    return rows


def intake_of(samples: tuple[Sample, ...], inputs: Sequence[tuple[int, str, str]]) -> Intake:
    """The intake behind the rows of one scan; ``inputs`` are (scan, kind, body)."""
    if not inputs:
        return Intake(samples)
    bodies: dict[str, list[Any]] = {"outcome": [], "link": [], "request": [], "fault": []}
    for _, kind, body in inputs:
        bodies[kind].append(json.loads(body))
    return Intake(
        samples,
        tuple(_read_outcome(body) for body in bodies["outcome"]),
        tuple(_read_status(body) for body in bodies["link"]),
        tuple(_read_request(body) for body in bodies["request"]),
        tuple((subject, detail) for subject, detail in bodies["fault"]),
    )


def order_row(scan: int, order: Order) -> Row:
    """One row of ``orders``."""
    authority = int(order.authority)
    return (order.number, scan, order.unit, order.action.value, order.value, authority, order.source, order.t_ns)


def order_of(number: int, unit: str, action: str, value: float, authority: int, source: str, t_ns: int) -> Order:
    """The order in a row of ``orders`` (without its scan)."""
    return Order(number, unit, Action(action), value, Authority(authority), source, t_ns)


def event_row(scan: int, event: Event) -> Row:
    """One row of ``events``."""
    return (scan, event.kind.value, event.subject, event.t_ns, event.text, compact(dict(event.fields)))


def event_of(kind: str, subject: str, t_ns: int, text: str, fields: str) -> Event:
    """The event in a row of ``events`` (without its scan)."""
    return Event(EventKind(kind), subject, t_ns, text, json.loads(fields))


def spectrum_row(spectrum: Spectrum) -> Row:
    """One row of ``spectra``; absorbance as 4-byte floats (the instruments resolve 1e-4)."""
    absorbance = array("f", spectrum.absorbance).tobytes()
    return (spectrum.source, spectrum.t_ns, spectrum.start_per_cm, spectrum.step_per_cm, absorbance)


def spectrum_of(source: str, t_ns: int, start_per_cm: float, step_per_cm: float, absorbance: bytes) -> Spectrum:
    """The spectrum in a row of ``spectra``."""
    values = array("f")
    values.frombytes(absorbance)
    return Spectrum(source, t_ns, start_per_cm, step_per_cm, tuple(values))


def _outcome(outcome: Outcome) -> list[object]:
    return [outcome.order_number, outcome.unit, outcome.action, outcome.result, outcome.t_ns, outcome.detail]


def _read_outcome(body: list[Any]) -> Outcome:
    number, unit, action, result, t_ns, detail = body
    return Outcome(number, unit, Action(action), Result(result), t_ns, detail)


def _status(status: DeviceStatus) -> list[object]:
    who = status.identity
    identity = who and [who.maker, who.model, who.serial_no, who.firmware, who.simulated]
    return [status.device, status.link, status.t_ns, status.detail, identity, status.power_cycled]


def _read_status(body: list[Any]) -> DeviceStatus:
    device, link, t_ns, detail, identity, power_cycled = body
    who = DeviceIdentity(*identity) if identity else None
    return DeviceStatus(device, LinkState(link), t_ns, detail, who, power_cycled)


def _request(request: Request) -> list[object]:
    args: Mapping[str, str | float] = dict(request.args)
    return [request.id, request.verb, request.who, request.t_ns, request.target, args]


def _read_request(body: list[Any]) -> Request:
    request_id, verb, who, t_ns, target, args = body
    return Request(request_id, Verb(verb), who, t_ns, target, args)
