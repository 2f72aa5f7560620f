"""Faults as people write them on a command line: ``kind@target``, then ``at=``, ``for=`` and ``size=``."""

from __future__ import annotations

import math

import click

from rigd.model.units import UnitError, parse_quantity
from rigd.ports.plant import FaultSpec

FORM = 'KIND@TARGET[,at=TIME][,for=TIME][,size=NUMBER], e.g. "block@L-4,at=12 min"'


def parse_fault(text: str) -> FaultSpec:
    """Read one ``--fault``. ``click.UsageError`` says what is wrong; kinds and targets are judged by the simulator.

    >>> parse_fault("leak@L-1,at=2 min,size=0.5")
    FaultSpec(kind='leak', target='L-1', onset_s=120.0, duration_s=inf, magnitude=0.5)
    """
    head, *parts = (part.strip() for part in text.split(","))
    kind, at, target = head.partition("@")
    if not at or not kind or not target:
        raise click.UsageError(f"--fault {text!r} cannot be read; write {FORM}")
    values = {"at": 0.0, "for": math.inf, "size": 1.0}
    for part in parts:
        key, equals, value = part.partition("=")
        if key not in values or not equals:
            raise click.UsageError(f"--fault {text!r}: {part!r} is not one of at=, for=, size=; write {FORM}")
        values[key] = number(value, f"--fault {key}") if key == "size" else seconds(value, f"--fault {key}")
    return FaultSpec(kind, target, values["at"], values["for"], values["size"])


def seconds(text: str, option: str) -> float:
    """A time with its unit, in seconds; ``click.UsageError`` names the option."""
    try:
        return parse_quantity(text, "time")
    except UnitError as error:
        raise click.UsageError(f"{option}: {error}") from error


def number(text: str, option: str) -> float:
    """A finite plain number; ``click.UsageError`` names the option."""
    try:
        value = float(text)
    except ValueError:
        value = math.nan
    if not math.isfinite(value):
        raise click.UsageError(f"{option}: {text!r} is not a number")
    return value
