"""The nights file: which numbers of rig, chemistry, recipe and faults are varied, how, and how often."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field

from rigd.config.quantity import Duration
from rigd.config.table import Id, Name, Number, Table, Text

Design = Literal["random", "latin hypercube", "sobol", "all combinations"]
Bound = Text | Number


class VaryTable(Table):
    """One number. Exactly one of the four says how it varies; bounds are written as the number itself, with its unit.

    ``uniform``: lowest, highest. ``normal``: mean, standard deviation. ``lognormal``: median, factor of one standard
    deviation (above 1). ``choose``: any of these, equally likely.
    """

    what: Text
    uniform: Annotated[tuple[Bound, ...], Field(min_length=2, max_length=2)] | None = None
    normal: Annotated[tuple[Bound, ...], Field(min_length=2, max_length=2)] | None = None
    lognormal: Annotated[tuple[Bound, ...], Field(min_length=2, max_length=2)] | None = None
    choose: Annotated[tuple[Bound, ...], Field(min_length=1, max_length=1000)] | None = None


class NightFaultTable(Table):
    """A fault that comes with a ``chance``, at a time and of a size drawn evenly between two ends."""

    kind: Name
    target: Name
    chance: Annotated[float, Field(strict=True, ge=0, le=1)] = 1.0
    at: Annotated[tuple[Duration, ...], Field(min_length=2, max_length=2)]
    size: Annotated[tuple[Number, ...], Field(min_length=2, max_length=2)] = (1.0, 1.0)


class NightsFile(Table):
    """A nights file as a whole. ``nights`` is how many; a sobol design needs a few per varied number more."""

    schema_: Literal["rigd-nights-1"] = Field(alias="schema")
    name: Id
    rig: Text
    recipe: Text
    nights: Annotated[int, Field(strict=True, ge=1, le=1_000_000)]
    seed: Annotated[int, Field(strict=True, ge=1, le=1_000_000_000)] = 1
    design: Design = "latin hypercube"
    vary: tuple[VaryTable, ...] = ()
    faults: tuple[NightFaultTable, ...] = ()
