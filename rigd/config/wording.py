"""What a structural finding says: found, allowed, what to do; from the error of the structure check."""

from __future__ import annotations

from collections.abc import Iterable
from enum import Enum
from typing import Any, Literal, get_args, get_origin

from pydantic.fields import FieldInfo
from pydantic_core import ErrorDetails

from rigd.config.findings import listed, nearest
from rigd.config.lines import Path
from rigd.config.quantity import AnyQuantity, Quantity
from rigd.config.source import Source
from rigd.config.table import ID_PATTERN, NAME_PATTERN, IfMissing, Table
from rigd.model.units import HOUSE

Finding = tuple[str, str, str]
"""Code, message, remedy."""

_PATTERNS = {
    ID_PATTERN: "letters, digits, '_' and '-', a letter first, at most 40 of them",
    NAME_PATTERN: "letters, digits, blanks and , ' ( ) _ -, at most 60 of them",
}
_KINDS = {
    "bool_type": "true or false",
    "int_type": "a whole number",
    "float_type": "a number",
    "string_type": "text in double quotes",
    "tuple_type": "a list in [ ]",
    "dict_type": "a table",
    "model_type": "a table",
    "model_attributes_type": "a table",
}
_BOUNDS = {"greater_than": "gt", "greater_than_equal": "ge", "less_than": "lt", "less_than_equal": "le"}
_BOUND_WORDS = {"gt": "above", "ge": "at least", "lt": "below", "le": "at most"}


def explain(model: type[Table], source: Source, path: Path, error: ErrorDetails) -> Finding:
    """Code, message and remedy of one structural error at ``path``."""
    kind, found = error["type"], _shown(source.value_at(path))
    field = field_at(model, path)
    if kind == "extra_forbidden":
        return _unknown_key(model, path)
    if kind == "missing" or (kind == "string_too_short" and _if_missing(field)):
        return _missing(model, path, field)
    if kind in ("literal_error", "enum"):
        return _choice(field, source.value_at(path), found)
    if kind in _BOUNDS:
        bound = _BOUNDS[kind]
        limit = error.get("ctx", {}).get(bound)
        return "value-out-of-range", f"found {found}; it must be {_BOUND_WORDS[bound]} {limit}", "correct the value"
    if kind in _KINDS:
        return "type-wrong", f"found {found}; allowed is {_KINDS[kind]}", _example(path, field)
    return _other(kind, found, path, field, error)


def _other(kind: str, found: str, path: Path, field: FieldInfo | None, error: ErrorDetails) -> Finding:
    context: dict[str, Any] = error.get("ctx", {})
    if "text" in context:  # one of our own: the type is the code, the text the message
        return kind, context["text"], _example(path, field)
    if kind == "string_pattern_mismatch":
        allowed = _PATTERNS.get(context.get("pattern", ""), f"text like {context.get('pattern')}")
        return "text-malformed", f"found {found}; allowed: {allowed}", "choose another spelling"
    if kind in ("too_short", "too_long"):
        fewest, most = context.get("min_length"), context.get("max_length")
        allowed = f"at least {fewest}" if fewest is not None else f"at most {most}"
        return "list-length", f"found {context.get('actual_length')} item(s); allowed are {allowed}", "correct the list"
    if kind in ("string_too_short", "string_too_long"):
        return "text-malformed", f"found {found}; the text is empty or too long", "write a short text"
    if kind.startswith(("datetime", "timezone")):
        remedy = "write a date and time with its offset, such as 2031-01-31T06:00:00Z"
        return "time-unreadable", f"found {found}, not a time with an offset", remedy
    return "value-wrong", f"found {found}: {error['msg'][:200]}", "correct the value"


def _unknown_key(model: type[Table], path: Path) -> Finding:
    table = table_at(model, path[:-1])
    known = [field.alias or name for name, field in table.model_fields.items()] if table else []
    message = f"unknown key {_shown(path[-1])}{nearest(str(path[-1]), known)}"
    return "key-unknown", message, f"allowed here: {listed(known)}"


def _missing(model: type[Table], path: Path, field: FieldInfo | None) -> Finding:
    own = _if_missing(field)
    if own:
        return own.code, f"{path[-1]!r} is missing or empty", own.remedy
    if isinstance(path[-1], int):
        return "list-length", "the list is too short; two values are needed", "write both ends, lower one first"
    table = table_at(model, path[:-1])
    about = (table.__doc__ or "").partition(".")[0].partition(",")[0].partition(";")[0] if table else ""
    where = f" here: {about[0].lower()}{about[1:]}" if about and len(path) > 1 else ""
    return "key-missing", f"{path[-1]!r} is missing{where}", _example(path, field)


def _choice(field: FieldInfo | None, value: object, found: str) -> Finding:
    allowed = [str(choice) for choice in _choices(field.annotation if field else None)]
    hint = nearest(value, allowed) if isinstance(value, str) else ""
    return "choice-unknown", f"found {found}; allowed: {listed(allowed)}{hint}", "write one of these"


def _choices(annotation: object) -> Iterable[object]:
    if get_origin(annotation) is Literal:
        return get_args(annotation)
    if isinstance(annotation, type) and issubclass(annotation, Enum):
        return [member.value for member in annotation]
    return [choice for part in get_args(annotation) for choice in _choices(part)]


def _example(path: Path, field: FieldInfo | None) -> str:
    """What to write, by an example where one is known."""
    if field is None:
        return "correct the value"
    key = next((step for step in reversed(path) if isinstance(step, str)), "")
    for note in _notes(field):
        if isinstance(note, Quantity):
            return f'write for example {key} = "1 {HOUSE[note.dimension]}"'
        if isinstance(note, AnyQuantity):
            return f'write for example {key} = "8 bar", in the unit of what is measured'
    choices = list(_choices(field.annotation))
    if choices:
        return f"write {key} = one of {listed(str(choice) for choice in choices)}"
    if _tables(field.annotation):
        return f"add [{key}] or [[{key}]] with its keys; the example files show how"
    plain = {bool: "true or false", int: "a whole number", str: "text in double quotes", float: "a number"}
    what = plain.get(field.annotation) if isinstance(field.annotation, type) else None
    return f"write {key} = {what}" if what else "the example files show how"


def _notes(field: FieldInfo) -> Iterable[object]:
    """Annotations of a field, also those inside an optional or a list."""
    yield from field.metadata
    yield from _inner_notes(field.annotation)


def _inner_notes(annotation: object) -> Iterable[object]:
    yield from getattr(annotation, "__metadata__", ())
    for part in get_args(annotation):
        yield from _inner_notes(part)


def _if_missing(field: FieldInfo | None) -> IfMissing | None:
    return next((note for note in field.metadata if isinstance(note, IfMissing)), None) if field else None


def table_at(model: type[Table], path: Path) -> type[Table] | None:
    """The table class that describes what stands at ``path``."""
    table: type[Table] | None = model
    for step in path:
        if isinstance(step, str):
            field = _field(table, step) if table else None
            inner = _tables(field.annotation) if field else []
            table = inner[0] if inner else None
    return table


def field_at(model: type[Table], path: Path) -> FieldInfo | None:
    """The field that describes what stands at ``path``, ``None`` for keys that people choose."""
    keys = [depth for depth, step in enumerate(path) if isinstance(step, str)]
    if not keys:
        return None
    table = table_at(model, path[: keys[-1]])
    return _field(table, str(path[keys[-1]])) if table else None


def _field(table: type[Table], key: str) -> FieldInfo | None:
    return next((field for name, field in table.model_fields.items() if (field.alias or name) == key), None)


def _tables(annotation: object) -> list[type[Table]]:
    if isinstance(annotation, type) and issubclass(annotation, Table):
        return [annotation]
    return [table for part in get_args(annotation) for table in _tables(part)]


def _shown(value: object) -> str:
    text = repr(value)
    return text if len(text) <= 60 else f"{text[:57]}..."
