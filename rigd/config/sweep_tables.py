"""The ``[sweep]`` section of a recipe: which points, in which order."""

from collections.abc import Mapping
from typing import Annotated, Any, Literal, Self

from pydantic import ConfigDict, Discriminator, Field, Tag, model_validator
from pydantic_core import PydanticCustomError

from rigd.config.quantity import Duration, Flow, Temperature
from rigd.config.table import Count, Id, Number, Table

Share = Annotated[Number, Field(ge=1e-6, le=1e6)]
Flows = Annotated[dict[Id, Flow], Field(min_length=1)]
Ratio = Annotated[dict[Id, Share], Field(min_length=1)]

TAGS = ("<one>", "<list>", "<range>")
"""Union tags; the reader takes them out of the paths of findings."""


def _shape(value: object) -> str:
    if isinstance(value, (list, tuple)):
        return "<list>"
    return "<range>" if isinstance(value, (Mapping, Table)) else "<one>"


def _shape_of_ratio(value: object) -> str:
    return "<list>" if isinstance(value, (list, tuple)) else "<one>"


class FlowRangeTable(Table):
    """``count`` flows from one end to the other, ends included, evenly or geometrically spaced."""

    from_: Flow = Field(alias="from")
    to: Flow
    count: Annotated[int, Field(strict=True, ge=2, le=1000)]
    spacing: Literal["linear", "geometric"] = "linear"


class TimeRangeTable(Table):
    """``count`` residence times from one end to the other, ends included, evenly or geometrically spaced."""

    from_: Duration = Field(alias="from")
    to: Duration
    count: Annotated[int, Field(strict=True, ge=2, le=1000)]
    spacing: Literal["linear", "geometric"] = "linear"


FlowList = Annotated[tuple[Flow, ...], Field(min_length=1, max_length=1000)]
TimeList = Annotated[tuple[Duration, ...], Field(min_length=1, max_length=1000)]
TotalFlow = Annotated[
    Annotated[Flow, Tag("<one>")] | Annotated[FlowList, Tag("<list>")] | Annotated[FlowRangeTable, Tag("<range>")],
    Discriminator(_shape),
]
ResidenceTime = Annotated[
    Annotated[Duration, Tag("<one>")] | Annotated[TimeList, Tag("<list>")] | Annotated[TimeRangeTable, Tag("<range>")],
    Discriminator(_shape),
]
Temperatures = Annotated[
    Annotated[Temperature, Tag("<one>")]
    | Annotated[Annotated[tuple[Temperature, ...], Field(min_length=1, max_length=100)], Tag("<list>")],
    Discriminator(_shape_of_ratio),
]
Ratios = Annotated[
    Annotated[Ratio, Tag("<one>")]
    | Annotated[Annotated[tuple[Ratio, ...], Field(min_length=1, max_length=100)], Tag("<list>")],
    Discriminator(_shape_of_ratio),
]

FORMS = ("points", "total_flow", "residence_time")


def _one_form(schema: dict[str, Any]) -> None:
    schema["oneOf"] = [{"required": [name]} for name in FORMS]
    schema["not"] = {"required": ["points", "ratio"]}


class SweepTable(Table):
    """Points by flows, by total flow, or by residence time; temperatures are the outer loop, ratios the next.

    ``return_every = n`` repeats the first point of a temperature after every n points; ``blank_every = n`` puts a
    solvent blank at the fastest flows there. ``order`` holds within a temperature.
    """

    model_config = ConfigDict(json_schema_extra=_one_form)

    temperature: Temperatures
    points: Annotated[tuple[Flows, ...], Field(min_length=1, max_length=1000)] | None = None
    total_flow: TotalFlow | None = None
    residence_time: ResidenceTime | None = None
    ratio: Ratios | None = None
    order: Literal["given", "ascending", "descending", "random"] = "given"
    repeats: Annotated[Count, Field(le=100)] = 1
    return_every: Count | None = None
    blank_every: Count | None = None
    seed: Annotated[int, Field(strict=True, ge=0)] = 1

    @model_validator(mode="after")
    def _one(self) -> Self:
        given = [name for name in FORMS if getattr(self, name) is not None]
        text = ""
        if len(given) != 1:
            text = f"found {' and '.join(given) or 'none'}; a sweep needs exactly one of {', '.join(FORMS)}"
        elif self.points is not None and self.ratio is not None:
            text = "'points' state every flow; 'ratio' belongs to total_flow or residence_time"
        if text:
            raise PydanticCustomError("sweep-form", "{text}", {"text": text})
        return self
