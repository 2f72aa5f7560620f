"""Units a person may write, and their exact conversion to the house unit of each dimension.

House units: flow mL/min, volume mL, pressure bar (gauge unless the name says ``bara``), temperature degC,
temperature difference K, time s, length mm, and so on (``HOUSE``). Factors are exact definitions (SI Brochure,
9th edition 2019, tables 5 and 8; the pound-force per square inch and the inch from the international yard and pound
agreement of 1959). "degC" is a temperature, "K" alone a difference: 5 K of deadband is not 5 degrees above zero.
"""

from __future__ import annotations

import math
import re
from dataclasses import dataclass
from difflib import get_close_matches


@dataclass(frozen=True, slots=True)
class Unit:
    """A unit symbol: ``house = value * factor + offset`` in the house unit of its dimension."""

    symbol: str
    dimension: str
    factor: float
    offset: float = 0.0


HOUSE: dict[str, str] = {
    "flow": "mL/min",
    "volume": "mL",
    "pressure": "bar",
    "pressure rate": "bar/s",
    "temperature": "degC",
    "temperature difference": "K",
    "temperature rate": "K/min",
    "time": "s",
    "length": "mm",
    "mass": "g",
    "amount concentration": "mol/L",
    "molar mass": "g/mol",
    "molar energy": "kJ/mol",
    "compliance": "mL/bar",
    "power": "W",
    "viscosity": "mPa s",
    "density": "g/mL",
    "specific heat": "J/(g K)",
    "wavenumber": "1/cm",
    "fraction": "1",
    "rate": "1/s",
    "diffusivity": "m2/s",
    "current": "mA",
    "baud": "baud",
    "absorbance": "AU",
    "heat conductance": "W/K",
    "force": "N",
    "absorptivity": "L/(mol cm)",
    "compressibility": "1/bar",
    "site density": "mmol/g",
    "adsorption constant": "L/mol",
}

_PSI_BAR = 0.45359237 * 9.80665 / 0.0254**2 / 1e5

_TABLE: tuple[Unit, ...] = (
    Unit("mL/min", "flow", 1.0),
    Unit("uL/min", "flow", 1e-3),
    Unit("mL/h", "flow", 1 / 60),
    Unit("uL/s", "flow", 0.06),
    Unit("mL/s", "flow", 60.0),
    Unit("L/h", "flow", 1000 / 60),
    Unit("mL", "volume", 1.0),
    Unit("uL", "volume", 1e-3),
    Unit("L", "volume", 1000.0),
    Unit("cm3", "volume", 1.0),
    Unit("bar", "pressure", 1.0),
    Unit("barg", "pressure", 1.0),
    Unit("mbar", "pressure", 1e-3),
    Unit("kPa", "pressure", 1e-2),
    Unit("MPa", "pressure", 10.0),
    Unit("psi", "pressure", _PSI_BAR),
    Unit("bar/s", "pressure rate", 1.0),
    Unit("bar/min", "pressure rate", 1 / 60),
    Unit("mbar/s", "pressure rate", 1e-3),
    Unit("degC", "temperature", 1.0),
    Unit("degF", "temperature", 5 / 9, -160 / 9),
    Unit("K", "temperature difference", 1.0),
    Unit("K/min", "temperature rate", 1.0),
    Unit("K/s", "temperature rate", 60.0),
    Unit("s", "time", 1.0),
    Unit("ms", "time", 1e-3),
    Unit("min", "time", 60.0),
    Unit("h", "time", 3600.0),
    Unit("d", "time", 86400.0),
    Unit("mm", "length", 1.0),
    Unit("um", "length", 1e-3),
    Unit("cm", "length", 10.0),
    Unit("m", "length", 1000.0),
    Unit("in", "length", 25.4),
    Unit("g", "mass", 1.0),
    Unit("mg", "mass", 1e-3),
    Unit("kg", "mass", 1000.0),
    Unit("mol/L", "amount concentration", 1.0),
    Unit("mmol/L", "amount concentration", 1e-3),
    Unit("g/mol", "molar mass", 1.0),
    Unit("kJ/mol", "molar energy", 1.0),
    Unit("J/mol", "molar energy", 1e-3),
    Unit("mL/bar", "compliance", 1.0),
    Unit("uL/bar", "compliance", 1e-3),
    Unit("W", "power", 1.0),
    Unit("kW", "power", 1000.0),
    Unit("mPa s", "viscosity", 1.0),
    Unit("Pa s", "viscosity", 1000.0),
    Unit("g/mL", "density", 1.0),
    Unit("kg/m3", "density", 1e-3),
    Unit("J/(g K)", "specific heat", 1.0),
    Unit("kJ/(kg K)", "specific heat", 1.0),
    Unit("1/cm", "wavenumber", 1.0),
    Unit("%", "fraction", 1e-2),
    Unit("1", "fraction", 1.0),
    Unit("1/s", "rate", 1.0),
    Unit("1/min", "rate", 1 / 60),
    Unit("1/h", "rate", 1 / 3600),
    Unit("m2/s", "diffusivity", 1.0),
    Unit("cm2/s", "diffusivity", 1e-4),
    Unit("mA", "current", 1.0),
    Unit("baud", "baud", 1.0),
    Unit("AU", "absorbance", 1.0),
    Unit("mAU", "absorbance", 1e-3),
    Unit("W/K", "heat conductance", 1.0),
    Unit("N", "force", 1.0),
    Unit("kN", "force", 1e3),
    Unit("L/(mol cm)", "absorptivity", 1.0),
    Unit("1/bar", "compressibility", 1.0),
    Unit("mmol/g", "site density", 1.0),
    Unit("mol/kg", "site density", 1.0),
    Unit("L/mol", "adsorption constant", 1.0),
)

UNITS: dict[str, Unit] = {unit.symbol: unit for unit in _TABLE}

_QUANTITY = re.compile(r"\s*([-+]?(?:\d+\.?\d*|\.\d+)(?:[eE][-+]?\d+)?)\s*(.*?)\s*")


class UnitError(ValueError):
    """A quantity that cannot be read; the message says what was found and what is allowed."""


def symbols(dimension: str) -> tuple[str, ...]:
    """The unit symbols accepted for a dimension, house unit first."""
    return tuple(unit.symbol for unit in _TABLE if unit.dimension == dimension)


def parse_quantity(text: str, dimension: str) -> float:
    """Read ``"0.1 mL/min"`` as a number in the house unit of ``dimension``.

    Raises ``UnitError`` for a missing, unknown or wrong unit and for anything that is not a finite number. A bare
    number is refused, except for the dimension "fraction".

    >>> parse_quantity("250 uL/min", "flow")
    0.25
    >>> round(parse_quantity("100 psi", "pressure"), 4)
    6.8948
    """
    allowed = ", ".join(symbols(dimension))
    match = _QUANTITY.fullmatch(text)
    if match is None:
        raise UnitError(f"{text!r} is not a number with a unit; write a {dimension} such as '1 {HOUSE[dimension]}'")
    number, symbol = float(match[1]), match[2]
    if not math.isfinite(number):
        raise UnitError(f"{text!r} is not a finite number")
    if not symbol:
        if dimension != "fraction":
            raise UnitError(f"{text!r} has no unit; a {dimension} needs one of {allowed}")
        symbol = "1"
    unit = UNITS.get(symbol)
    if unit is None:
        near = get_close_matches(symbol, symbols(dimension), n=1, cutoff=0.5)
        hint = f"; did you mean {near[0]!r}?" if near else ""
        raise UnitError(f"unknown unit {symbol!r} in {text!r}; a {dimension} needs one of {allowed}{hint}")
    if unit.dimension != dimension:
        raise UnitError(f"{text!r} is a {unit.dimension}, but a {dimension} is needed here (one of {allowed})")
    return number * unit.factor + unit.offset
