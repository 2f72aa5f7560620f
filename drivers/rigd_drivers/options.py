"""Reads the options of a device with pydantic; each wrong one becomes a ``Problem`` that says what is allowed."""

from __future__ import annotations

from collections.abc import Mapping
from difflib import get_close_matches
from typing import Annotated, TypeVar

from pydantic import BaseModel, BeforeValidator, ConfigDict, ValidationError, WithJsonSchema

from rigd.model.devices import DeviceSpec
from rigd.model.errors import ConfigError
from rigd.model.problems import Problem
from rigd.model.units import UnitError, parse_quantity, symbols


class Options(BaseModel):
    """Base of all options: unknown keys are refused."""

    model_config = ConfigDict(extra="forbid", frozen=True)


class NoOptions(Options):
    """A device that needs none."""


S = TypeVar("S", bound=Options)


def _seconds(value: object) -> float:
    if not isinstance(value, str):
        raise ValueError(f"found {value!r}, but a time is text with a unit such as '10 s'")
    try:
        return parse_quantity(value, "time")
    except UnitError as error:
        raise ValueError(str(error)) from None


_TIME_PATTERN = rf"^\s*(?:\d+\.?\d*|\.\d+)\s*(?:{'|'.join(symbols('time'))})\s*$"

Seconds = Annotated[
    float, BeforeValidator(_seconds), WithJsonSchema({"type": "string", "pattern": _TIME_PATTERN}, mode="validation")
]
"""A time with its unit ("10 s"), read in seconds."""


def read_options(spec: DeviceSpec, model: type[S]) -> S:
    """The device's options; ``ConfigError`` with one ``Problem`` for each wrong one."""
    try:
        return model.model_validate(dict(spec.options))
    except ValidationError as error:
        raise ConfigError(tuple(_problem(spec, model, item) for item in error.errors())) from None


def schema_of(model: type[Options]) -> Mapping[str, object]:
    """JSON Schema of the options."""
    return model.model_json_schema(mode="validation")


def check_spec(spec: DeviceSpec, dialects: tuple[str, ...], *, addressed: bool) -> None:
    """Dialect and address; ``ConfigError`` with all that is wrong. ``addressed``: 01 to 99 is needed, else nothing."""
    problems = []
    if spec.dialect not in ("", *dialects):
        problems.append(_wrong(spec, "dialect", spec.dialect, f"this driver speaks {', '.join(dialects)}"))
    if addressed and not (
        len(spec.address) == 2 and spec.address.isascii() and spec.address.isdigit() and spec.address != "00"
    ):
        problems.append(_wrong(spec, "address", spec.address, "write the two digits set at the device, '01' to '99'"))
    if not addressed and spec.address:
        problems.append(_wrong(spec, "address", spec.address, "leave it out; this device is alone on its line"))
    if problems:
        raise ConfigError(tuple(problems))


def refuse(spec: DeviceSpec, code: str, key: str, message: str, remedy: str) -> ConfigError:
    """One problem of this device, ready to raise."""
    return ConfigError((Problem(code, message, remedy, key=f"devices[{spec.id}].{key}"),))


def _wrong(spec: DeviceSpec, key: str, found: str, remedy: str) -> Problem:
    return Problem(f"{key}-wrong", f"{key} {found!r} is not possible here", remedy, key=f"devices[{spec.id}].{key}")


def _problem(spec: DeviceSpec, model: type[Options], item: Mapping[str, object]) -> Problem:
    path = item["loc"]
    name = ".".join(str(step) for step in path) if isinstance(path, tuple) else ""
    key = f"devices[{spec.id}].options.{name}"
    known = list(model.model_fields)
    if item["type"] == "extra_forbidden":
        near = get_close_matches(name, known, n=1, cutoff=0.5)
        hint = f"did you mean {near[0]!r}? " if near else ""
        return Problem("key-unknown", f"unknown option {name!r}", f"{hint}known: {', '.join(known) or 'none'}", key=key)
    message = str(item["msg"]).removeprefix("Value error, ")
    return Problem("option-wrong", f"{name}: {message}", model.model_fields[name].description or "", key=key)
