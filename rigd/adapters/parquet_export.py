"""A run as Parquet files, exact and whole: one row per sample, one per event. Needs pyarrow (``rigd[parquet]``)."""

from __future__ import annotations

import json
from collections.abc import Iterator
from pathlib import Path
from typing import TYPE_CHECKING, Any

from rigd.adapters.journal_reader import JournalReader
from rigd.adapters.whole_file import whole_files
from rigd.model.errors import RigError

if TYPE_CHECKING:
    import pyarrow as pa

MISSING = "Parquet files need pyarrow, which is not installed; install it with: pip install 'rigd[parquet]'"
BATCH_SAMPLES = 200_000


def export_parquet(run: Path, folder: Path) -> tuple[int, int]:
    """Write ``samples.parquet`` (t_ns, tag, value, unit, quality, scan) and ``events.parquet``; returns their rows.

    The facts about the run stand in the files' metadata. Files that were there are replaced only by whole ones.
    Raises ``RigError`` without pyarrow, ``OSError`` without room, ``JournalError`` for a journal that cannot be read.
    """
    try:
        import pyarrow as pa
        import pyarrow.parquet as pq
    except ImportError as error:
        raise RigError(MISSING) from error
    paths = [folder / f"{name}.parquet" for name in ("samples", "events")]
    counts = []
    try:
        with JournalReader(run) as journal, whole_files(*paths) as unfinished:
            samples = (_sample_schema(pa, journal), _sample_batches(journal))
            events = (_event_schema(pa, journal), _event_batches(journal))
            for path, (schema, batches) in zip(unfinished, (samples, events), strict=True):
                with pq.ParquetWriter(path, schema) as writer:
                    tables = (pa.Table.from_pydict(columns, schema=schema) for columns in batches)
                    counts.append(sum(_written(writer, table) for table in tables))
    except OSError as error:
        raise OSError(error.errno, error.strerror, str(folder)) from error
    return counts[0], counts[1]


def _written(writer: Any, table: Any) -> int:
    writer.write_table(table)
    return int(table.num_rows)


def _sample_schema(pa: Any, journal: JournalReader) -> pa.Schema:
    word = pa.dictionary(pa.int32(), pa.string())
    fields = [("scan", pa.int64()), ("t_ns", pa.int64()), ("tag", word), ("value", pa.float64()), ("unit", word)]
    return pa.schema([*fields, ("quality", pa.int8())], metadata=_facts(journal))


def _event_schema(pa: Any, journal: JournalReader) -> pa.Schema:
    fields = [("t_ns", pa.int64())]
    fields += [(name, pa.string()) for name in ("kind", "subject", "text", "fields")]
    return pa.schema(fields, metadata=_facts(journal))


def _facts(journal: JournalReader) -> dict[str, str]:
    return {f"rigd.{key}": value for key, value in journal.meta.items()}


def _sample_batches(journal: JournalReader) -> Iterator[dict[str, list[Any]]]:
    units = {tag: info.unit for tag, info in journal.tags.items()}
    rows: list[tuple[Any, ...]] = []
    for record in journal.scans():
        rows += [(record.number, s.t_ns, s.tag, s.value, units[s.tag], int(s.quality)) for s in record.intake.samples]
        if len(rows) >= BATCH_SAMPLES:
            yield _columns(("scan", "t_ns", "tag", "value", "unit", "quality"), rows)
            rows = []
    yield _columns(("scan", "t_ns", "tag", "value", "unit", "quality"), rows)


def _event_batches(journal: JournalReader) -> Iterator[dict[str, list[Any]]]:
    rows = [
        (event.t_ns, event.kind.value, event.subject, event.text, json.dumps(dict(event.fields), ensure_ascii=False))
        for event in journal.events()
    ]
    yield _columns(("t_ns", "kind", "subject", "text", "fields"), rows)


def _columns(names: tuple[str, ...], rows: list[tuple[Any, ...]]) -> dict[str, list[Any]]:
    columns = [list(column) for column in zip(*rows, strict=True)] or [[] for _ in names]
    return dict(zip(names, columns, strict=True))
