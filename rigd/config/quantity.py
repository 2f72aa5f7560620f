"""Quantities in files: text with a unit, read as a number in the house unit of its dimension.

``Annotated[float, Quantity("flow", "positive")]`` reads ``"0.1 mL/min"``; its JSON Schema is a string whose pattern
lists the units of the dimension.
"""

from __future__ import annotations

import math
import re
from dataclasses import dataclass
from typing import Annotated, Literal

from pydantic import GetCoreSchemaHandler, GetJsonSchemaHandler
from pydantic.json_schema import JsonSchemaValue
from pydantic_core import CoreSchema, PydanticCustomError, core_schema

from rigd.model.units import HOUSE, UNITS, UnitError, parse_quantity, symbols

Sign = Literal["any", "positive", "not negative"]

LARGEST, SMALLEST = 1e12, 1e-18
"""Numbers beyond these, in any house unit, are slips of the keyboard and would only overflow later."""

_NUMBER = r"(?:\d+\.?\d*|\.\d+)(?:[eE][-+]?\d+)?"
_COMMA = re.compile(r"\s*[-+]?\d+,\d")
_HEAD: dict[Sign, str] = {"any": r"[-+]?", "not negative": r"\+?", "positive": r"\+?(?=[0-9.]*[1-9])"}
_SYMBOL = re.compile(r"\s*[-+]?" + _NUMBER + r"\s*(.*?)\s*")


def pattern(dimension: str, sign: Sign = "any") -> str:
    """The regular expression of a quantity, in the subset that JSON Schema and Python share."""
    units = "|".join(re.escape(symbol).replace(r"\ ", " ").replace("/", "/") for symbol in symbols(dimension))
    unit = f"(?:{units})?" if dimension == "fraction" else f"(?:{units})"
    return rf"^\s*{_HEAD[sign]}{_NUMBER}\s*{unit}\s*$"


def read_quantity(value: object, dimension: str, sign: Sign = "any") -> float:
    """A quantity from a file in its house unit. Raises ``PydanticCustomError`` whose type is the finding's code."""
    if isinstance(value, (int, float)) and not isinstance(value, bool):
        if dimension != "fraction":
            raise _error("unit-missing", f"{value} has no unit; a {dimension} needs one of {_allowed(dimension)}")
        value = repr(float(value)) if _fits(value) else "1e999"
    if not isinstance(value, str):
        house = HOUSE[dimension]
        raise _error("type-wrong", f"found {_kind(value)}, but a {dimension} is text with a unit such as '1 {house}'")
    if _COMMA.match(value):
        raise _error("quantity-unreadable", f"{value!r} has a decimal comma; write a decimal point")
    try:
        number = parse_quantity(value, dimension)
    except UnitError as error:
        raise _error(_code(value, dimension), str(error)) from None
    if not abs(number) <= LARGEST or 0 < abs(number) < SMALLEST:
        raise _error("quantity-unreadable", f"{value!r} is no quantity of a bench")
    if (sign == "positive" and number <= 0) or (sign == "not negative" and number < 0):
        raise _error(
            "value-out-of-range", f"{value!r} must {'be above zero' if sign == 'positive' else 'not be negative'}"
        )
    return number


def _fits(value: float) -> bool:
    try:
        return math.isfinite(float(value))
    except OverflowError:
        return False


def _allowed(dimension: str) -> str:
    return ", ".join(symbols(dimension))


def _kind(value: object) -> str:
    names = {bool: "true or false", list: "a list", dict: "a table"}
    return names.get(type(value), f"a {type(value).__name__}")


def _code(text: str, dimension: str) -> str:
    match = _SYMBOL.fullmatch(text)
    if match is None:
        return "quantity-unreadable"
    if not match[1]:
        return "unit-missing"
    unit = UNITS.get(match[1])
    if unit is None:
        return "unit-unknown"
    return "unit-wrong" if unit.dimension != dimension else "quantity-unreadable"


def _error(code: str, message: str) -> PydanticCustomError:
    return PydanticCustomError(code, "{text}", {"text": message})


HOUSE_UNIT = "x-house-unit"
"""Mark of a quantity in a schema while it is made: its default is a number of this unit."""


@dataclass(frozen=True, slots=True)
class Quantity:
    """Annotation of a ``float`` field that is written with a unit of ``dimension`` and meets ``sign``."""

    dimension: str
    sign: Sign = "any"

    def __get_pydantic_core_schema__(self, source: object, handler: GetCoreSchemaHandler) -> CoreSchema:
        return core_schema.no_info_plain_validator_function(
            lambda value: read_quantity(value, self.dimension, self.sign)
        )

    def __get_pydantic_json_schema__(self, schema: CoreSchema, handler: GetJsonSchemaHandler) -> JsonSchemaValue:
        text = {"type": "string", "pattern": pattern(self.dimension, self.sign), HOUSE_UNIT: HOUSE[self.dimension]}
        hint = f"{self.dimension}: {_allowed(self.dimension)}"
        if self.dimension != "fraction":
            return {**text, "description": hint}
        number: JsonSchemaValue = {"type": "number"}
        if self.sign != "any":
            number["exclusiveMinimum" if self.sign == "positive" else "minimum"] = 0
        return {"anyOf": [text, number], "description": hint}


@dataclass(frozen=True, slots=True)
class AnyQuantity:
    """Annotation of a ``str`` field: a quantity whose dimension depends on another key and is checked later."""

    def __get_pydantic_core_schema__(self, source: object, handler: GetCoreSchemaHandler) -> CoreSchema:
        return core_schema.no_info_plain_validator_function(_read_any)

    def __get_pydantic_json_schema__(self, schema: CoreSchema, handler: GetJsonSchemaHandler) -> JsonSchemaValue:
        units = "|".join(re.escape(symbol).replace(r"\ ", " ") for symbol in UNITS)
        return {
            "type": "string",
            "pattern": rf"^\s*[-+]?{_NUMBER}\s*(?:{units})\s*$",
            "description": "number with unit",
        }


def _read_any(value: object) -> str:
    if isinstance(value, (int, float)) and not isinstance(value, bool):
        raise _error("unit-missing", f"{value} has no unit; write a number and a unit such as '8 bar'")
    if not isinstance(value, str):
        raise _error("type-wrong", f"found {_kind(value)}, but text with a unit is needed, such as '8 bar'")
    match = _SYMBOL.fullmatch(value)
    if match is None or _COMMA.match(value):
        raise _error("quantity-unreadable", f"{value!r} is not a number with a unit; write for example '8 bar'")
    if not match[1]:
        raise _error("unit-missing", f"{value!r} has no unit; write a number and a unit such as '8 bar'")
    if match[1] not in UNITS:
        raise _error("unit-unknown", f"unknown unit {match[1]!r} in {value!r}; known are {', '.join(UNITS)}")
    return value


Flow = Annotated[float, Quantity("flow", "positive")]
Volume = Annotated[float, Quantity("volume", "positive")]
VolumeOrNone = Annotated[float, Quantity("volume", "not negative")]
Pressure = Annotated[float, Quantity("pressure", "positive")]
Temperature = Annotated[float, Quantity("temperature")]
Kelvin = Annotated[float, Quantity("temperature difference", "positive")]
Duration = Annotated[float, Quantity("time", "positive")]
Delay = Annotated[float, Quantity("time", "not negative")]
Length = Annotated[float, Quantity("length", "positive")]
Mass = Annotated[float, Quantity("mass", "not negative")]
Fraction = Annotated[float, Quantity("fraction", "not negative")]
Written = Annotated[str, AnyQuantity()]
