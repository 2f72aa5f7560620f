"""From values as read to checked tables: all structural findings at once, and whatever parsed for the later checks."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from typing import Any, TypeVar, get_args

from pydantic import TypeAdapter, ValidationError
from pydantic.fields import FieldInfo
from pydantic_core import ErrorDetails

from rigd.config.findings import Findings
from rigd.config.lines import Path
from rigd.config.source import Source
from rigd.config.table import Table
from rigd.config.wording import explain

T = TypeVar("T", bound=Table)

MOST_FINDINGS = 200
"""A file with more structural findings than this is another kind of file."""


def read_tables(model: type[T], source: Source, found: Findings) -> T:
    """Check the structure of a file. Findings go to ``found``; tables with findings are left out of the result."""
    try:
        table = model.model_validate(source.data)
    except ValidationError as error:
        _report(model, source, found, error.errors(include_url=False, include_context=True)[:MOST_FINDINGS])
        return _what_parsed(model, source.data)
    for key, value in _sections(table):
        for place, section in _tables_in(key, value):
            section.put(place)
    return table


def _report(model: type[Table], source: Source, found: Findings, errors: Iterable[ErrorDetails]) -> None:
    reported: set[Path] = set()
    for error in errors:
        path = _path(source.data, error)
        if path in reported or _follows(source, path, error):
            continue  # one value, one finding: the other members of a union say the same again
        reported.add(path)
        code, message, remedy = explain(model, source, path, error)
        found.error(code, path, message, remedy)


def _follows(source: Source, path: Path, error: ErrorDetails) -> bool:
    """True for a list that is too short only because its members have findings of their own."""
    value = source.value_at(path) if error["type"] == "too_short" else None
    return isinstance(value, list) and len(value) >= error.get("ctx", {}).get("min_length", 0)


def _path(data: Mapping[str, Any], error: ErrorDetails) -> Path:
    """The path in the file: without the steps that only pydantic knows (union members, key markers)."""
    here: Any = data
    path: Path = ()
    for step in error["loc"]:
        if _holds(here, step):
            here = here[step]
            path = (*path, step)
        elif error["type"] == "missing" and step == error["loc"][-1]:
            path = (*path, step)
    return path


def _holds(here: object, step: str | int) -> bool:
    if isinstance(here, dict):
        return step in here
    return isinstance(here, list) and isinstance(step, int) and step < len(here)


def _sections(table: Table) -> Iterable[tuple[str, object]]:
    for name, field in type(table).model_fields.items():
        yield field.alias or name, getattr(table, name)


def _tables_in(key: str, value: object) -> Iterable[tuple[Path, Table]]:
    if isinstance(value, Table):
        yield (key,), value
    elif isinstance(value, tuple):
        yield from (((key, index), item) for index, item in enumerate(value) if isinstance(item, Table))


def _what_parsed(model: type[T], data: Mapping[str, Any]) -> T:
    """The file without the tables and keys that have findings."""
    fields = model.model_fields.items()
    values: dict[str, Any] = {name: _section(field, field.alias or name, data) for name, field in fields}
    made: T = model.model_construct(**values)  # type: ignore[assignment]
    return made


def _section(field: FieldInfo, key: str, data: Mapping[str, Any]) -> Any:
    item = _item_table(field)
    if item is not None:
        rows = data.get(key)
        return tuple(_good_rows(item, key, rows if isinstance(rows, list) else []))
    try:
        value = TypeAdapter(field.rebuild_annotation()).validate_python(data[key])
    except (ValidationError, KeyError):
        if not field.is_required():
            return field.get_default(call_default_factory=True, validated_data={})
        return "" if field.annotation is str else None
    if isinstance(value, Table):
        value.put((key,))
    return value


def _good_rows(item: type[Table], key: str, rows: Iterable[object]) -> Iterable[Table]:
    for index, row in enumerate(rows):
        try:
            table = item.model_validate(row)
        except ValidationError:
            continue
        table.put((key, index))
        yield table


def _item_table(field: FieldInfo) -> type[Table] | None:
    """The table class of a list of tables, ``None`` for any other field."""
    arguments = get_args(field.annotation)
    many = len(arguments) == 2 and arguments[1] is Ellipsis
    item = arguments[0] if many else None
    return item if isinstance(item, type) and issubclass(item, Table) else None


def declared(source: Source, section: str, key: str = "id") -> frozenset[str]:
    """Names that a section declares, also those whose tables have findings: they are known, only not usable."""
    rows = source.data.get(section)
    if not isinstance(rows, list):
        return frozenset()
    names = (row.get(key) for row in rows if isinstance(row, dict))
    return frozenset(name for name in names if isinstance(name, str))
