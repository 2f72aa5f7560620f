"""Columns as one Parquet file, whole or not at all. Needs pyarrow (``rigd[parquet]``)."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from pathlib import Path

from rigd.adapters.parquet_export import MISSING
from rigd.model.errors import RigError


def write_parquet(path: Path, columns: Mapping[str, Sequence[object]]) -> Path:
    """Write the columns (all of one length) and return the path. Raises ``RigError`` without pyarrow or room."""
    try:
        import pyarrow as pa
        import pyarrow.parquet as pq
    except ImportError as error:
        raise RigError(MISSING) from error
    unfinished = path.with_name(f".{path.name}.part")
    try:
        pq.write_table(pa.table({name: list(values) for name, values in columns.items()}), unfinished)
        unfinished.replace(path)
    except OSError as error:
        raise RigError(f"cannot write {path}: {error}") from error
    finally:
        unfinished.unlink(missing_ok=True)
    return path
