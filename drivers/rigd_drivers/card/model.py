"""What a protocol card may say, and its reading with errors that name file, line, key and what is allowed."""

from __future__ import annotations

import re
import tomllib
from pathlib import Path
from typing import Annotated, Any, Literal

from pydantic import BaseModel, BeforeValidator, ConfigDict, Field, ValidationError

from rigd.model.devices import CHILLER_CHANNELS, PUMP_CHANNELS, VALVE_CHANNELS
from rigd.model.errors import ConfigError
from rigd.model.orders import Action
from rigd.model.problems import Problem
from rigd.model.units import UNITS

NEEDED = {"pump": PUMP_CHANNELS, "valve": VALVE_CHANNELS, "chiller": CHILLER_CHANNELS, "sensor": ()}
ORDERS = {
    "pump": {Action.DELIVER, Action.STOP, Action.FILL, Action.SWAP},
    "valve": {Action.MOVE},
    "chiller": {Action.SET_TEMPERATURE, Action.CIRCULATE},
    "sensor": set(),
}
MUST = {"pump": {Action.DELIVER, Action.STOP}, "valve": {Action.MOVE}, "chiller": ORDERS["chiller"], "sensor": set()}


def _unit(value: object) -> object:
    if value != "" and value not in UNITS:
        raise ValueError(f"found unit {value!r}; known: {', '.join(UNITS)}")
    return value


UnitName = Annotated[str, BeforeValidator(_unit)]


class Table(BaseModel):
    """Base: unknown keys are refused."""

    model_config = ConfigDict(extra="forbid", frozen=True)


class Register(Table):
    """A Modbus register or bit. ``address`` counts as ``link.address_base`` says."""

    table: Literal["coil", "discrete", "holding", "input"]
    address: int = Field(ge=0, le=65536)
    type: Literal["bit", "u16", "s16", "u32", "s32", "f32", "f64"] = "u16"
    word_order: Literal["high-first", "low-first"] = "high-first"
    byte_order: Literal["high-first", "low-first"] = "high-first"
    write: Literal["single", "multiple"] = "single"


class Question(Table):
    """A text exchange: what is sent, the pattern of the reply with named fields, a sample from the manual."""

    send: str
    reply: str
    sample: str


class Channel(Table):
    """Where a channel's value comes from: exactly one of read, constant, last_order, integral_of, sum."""

    read: str = ""
    constant: float | None = None
    last_order: str = ""
    integral_of: str = ""
    sum: dict[str, float] = Field(default_factory=dict)
    scale: float = 1.0
    offset: float = 0.0
    unit: UnitName = ""
    map: dict[str, float] = Field(default_factory=dict)
    signal: Literal["", "4-20mA", "pt100", "thermocouple-K", "thermocouple-T"] = ""
    span: tuple[float, float] | None = None


class Step(Table):
    """One exchange of an order: a register write (``write``, ``set``) or words (``send``, ``reply``, ``sample``)."""

    write: str = ""
    set: float | Literal["value"] = "value"
    verify: bool = True
    send: str = ""
    reply: str = ""
    sample: str = ""
    scale: float = 1.0
    offset: float = 0.0
    unit: UnitName = ""
    map: dict[str, float] = Field(default_factory=dict)
    confirm: str = ""
    tolerance: float = Field(default=0.0, ge=0)


class Order(Table):
    """The steps of one order in house units, and the values that the device takes."""

    steps: list[Step] = Field(min_length=1)
    range: tuple[float, float] | None = None


class Check(Table):
    """Proof of the stop: a register that holds ``equals``, or words whose reply matches."""

    read: str = ""
    equals: float = 0.0
    send: str = ""
    reply: str = ""
    sample: str = ""


class StopTable(Table):
    """The last will. ``moves_nothing`` says why a device needs none."""

    steps: list[Step] = Field(default_factory=list)
    check: list[Check] = Field(default_factory=list)
    moves_nothing: str = ""


class Identity(Table):
    """Who answers; each of serial and firmware may be read. ``expect`` compares a reading with a number or text."""

    maker: str = "unknown"
    model: str = "unknown"
    ask: str = ""
    serial: str = ""
    expect: dict[str, float | str] = Field(default_factory=dict)


class PowerOn(Table):
    """How a restart shows: a reading that equals ``equals``; ``clear`` are the steps that forget it."""

    read: str
    equals: float | str
    clear: list[Step] = Field(default_factory=list)


class Framing(Table):
    """How words are wrapped. Text keys take escapes of TOML (``"\\u0002"``)."""

    start: str = ""
    end: str = Field(default="\r", min_length=1)
    reply_start: str | None = None
    reply_end: str | None = None
    checksum: Literal["none", "sum", "xor", "crc16-modbus", "crc-ccitt", "lrc"] = "none"
    checksum_form: Literal["hex", "high-first", "low-first"] = "hex"
    checksum_covers_start: bool = False
    echo: bool = False


class CardLink(Table):
    """Protocol and what the port needs. ``address_base`` is 1 where the manual counts registers from 1."""

    protocol: Literal["modbus-tcp", "modbus-rtu", "text"]
    address_base: Literal[0, 1] = 0
    reply_timeout_s: float | None = Field(default=None, gt=0, le=30)


class Card(Table):
    """One device as its manual tells it. ``continuous``: a pump without syringes; the card engine keeps the account of
    fillings that the daemon orders, so that it needs no channels ``level`` and ``standby`` and no order ``fill``."""

    schema_: Literal["rigd-card-1"] = Field(alias="schema")
    title: str
    family: Literal["pump", "valve", "chiller", "sensor"]
    continuous: bool = False
    link: CardLink
    framing: Framing = Field(default_factory=Framing)
    identity: Identity = Field(default_factory=Identity)
    registers: dict[str, Register] = Field(default_factory=dict)
    questions: dict[str, Question] = Field(default_factory=dict)
    channels: dict[str, Channel]
    orders: dict[str, Order] = Field(default_factory=dict)
    stop: StopTable
    errors: dict[str, str] = Field(default_factory=dict)
    busy: dict[str, str] = Field(default_factory=dict)
    prepare: list[Step] = Field(default_factory=list)
    heartbeat: list[Step] = Field(default_factory=list)
    power_on: PowerOn | None = None

    @property
    def modbus(self) -> bool:
        """Whether this is a register map."""
        return self.link.protocol != "text"

    @property
    def all_steps(self) -> list[tuple[str, Step]]:
        """(key, step) of every step in the card."""
        groups = {f"orders.{name}.steps": order.steps for name, order in self.orders.items()}
        groups |= {"stop.steps": self.stop.steps, "prepare": self.prepare, "heartbeat": self.heartbeat}
        groups["power_on.clear"] = self.power_on.clear if self.power_on else []
        return [(key, step) for key, steps in groups.items() for step in steps]


def load_card(path: Path) -> Card:
    """The card in a file; ``ConfigError`` with one problem for each mistake."""
    from rigd_drivers.card.rules import findings

    try:
        text = path.read_text(encoding="utf-8")
        tables = tomllib.loads(text)
    except (OSError, UnicodeDecodeError) as error:
        raise ConfigError(
            (Problem("file-unreadable", f"cannot be read: {error}", "name a card file", file=str(path)),)
        ) from None
    except tomllib.TOMLDecodeError as error:
        found = re.search(r"line (\d+)", str(error))
        line = int(found[1]) if found else 0
        raise ConfigError(
            (Problem("toml-wrong", str(error), "correct the TOML at this line", file=str(path), line=line),)
        ) from None
    try:
        card = Card.model_validate(tables)
    except ValidationError as error:
        raise ConfigError(tuple(_problem(path, text, dict(item)) for item in error.errors())) from None
    wrong = findings(card)
    if wrong:
        raise ConfigError(
            tuple(
                Problem("card-wrong", message, remedy, file=str(path), line=line_of(text, key), key=key)
                for key, message, remedy in wrong
            )
        )
    return card


def line_of(text: str, key: str) -> int:
    """The line where a dotted key stands, or the nearest table above it; 0 when it is nowhere."""
    parts = [part for part in key.split(".") if not part.isdigit()]
    lines = text.splitlines()
    best, start = 0, 0
    for size in range(len(parts), 0, -1):
        head = ".".join(parts[:size])
        heads = (f"[{head}]", f"[[{head}]]")
        place = next((i for i, line in enumerate(lines) if line.split("#")[0].strip() in heads), None)
        if place is not None:
            best, start, parts = place + 1, place + 1, parts[size:]
            break
    for number, line in enumerate(lines[start:], start + 1):
        if line.startswith("[") and start:
            break
        if parts and re.match(rf'\s*"?{re.escape(parts[0])}"?\s*[=.]', line):
            return number
    return best


def _problem(path: Path, text: str, item: dict[str, Any]) -> Problem:
    key = ".".join(str(part) for part in item["loc"])
    message = str(item["msg"]).removeprefix("Value error, ")
    if item["type"] == "missing":
        return Problem("key-missing", f"{key} is missing", "add it; see `rigd card new`", file=str(path),
                       line=line_of(text, key), key=key)  # fmt: skip
    found = f"{message}; found {item['input']!r}"
    remedy = "remove it or correct its spelling" if item["type"] == "extra_forbidden" else "write what is allowed"
    return Problem("value-wrong", found, remedy, file=str(path), line=line_of(text, key), key=key)
