"""What a protocol card may say: one class per table, frozen. Meaning between tables is checked in ``rules``."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import BaseModel, BeforeValidator, ConfigDict, Field

from rigd.model.devices import CHILLER_CHANNELS, PUMP_CHANNELS, VALVE_CHANNELS
from rigd.model.orders import Action
from rigd.model.units import UNITS
from rigd_drivers.card.expressions import ExpressionError, parse

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
        raise ValueError(f"unit {value!r} is unknown; known: {', '.join(UNITS)}")
    return value


def _expression(value: object) -> object:
    if not isinstance(value, str):
        raise ValueError('an expression is text in quotes, such as "status & 4"')
    try:
        parse(value) if value else None
    except ExpressionError as error:
        raise ValueError(str(error)) from None
    return value


def _number_or_expression(value: object) -> object:
    if isinstance(value, str):
        return _expression(value)
    if isinstance(value, bool) or not isinstance(value, int | float):
        raise ValueError('a number, "value" or an expression in quotes is needed')
    return float(value)


UnitName = Annotated[str, BeforeValidator(_unit)]
Formula = Annotated[str, BeforeValidator(_expression)]
NumberOrFormula = Annotated[float | str, BeforeValidator(_number_or_expression)]
Seconds = Annotated[float, Field(ge=0, le=30)]


class Table(BaseModel):
    """Base: unknown keys are refused."""

    model_config = ConfigDict(extra="forbid", frozen=True)


class Register(Table):
    """A Modbus register or bit. ``address`` counts as ``link.address_base`` says, or is an expression of parameters.

    ``bit`` picks one bit of a word, 0 is the lowest. ``write``: "multiple" for devices that know only the function
    codes 15 and 16, "mask" (22) to change one bit without reading the word first. ``length``: registers of a text.
    """

    table: Literal["coil", "discrete", "holding", "input"]
    address: NumberOrFormula
    type: Literal["", "bit", "u16", "s16", "u32", "s32", "u64", "s64", "f32", "f64", "text"] = ""
    bit: int | None = Field(default=None, ge=0, le=15)
    length: int = Field(default=0, ge=0, le=60)
    word_order: Literal["high-first", "low-first"] = "high-first"
    byte_order: Literal["high-first", "low-first"] = "high-first"
    write: Literal["single", "multiple", "mask"] = "single"

    @property
    def kind(self) -> str:
        """The type; by default one bit of coils and discrete inputs, one unsigned word of the others."""
        return self.type or ("bit" if self.table in ("coil", "discrete") else "u16")


class Question(Table):
    """A text exchange: what is sent, the pattern of the reply with named fields, a sample from the manual.

    ``lines``: the reply has so many frames, which the pattern sees with a line feed between them; or it goes on until a
    frame matches ``last``. Without ``send`` nothing is sent: the device speaks by itself, and its next reply counts.
    """

    send: str = ""
    reply: str
    sample: str
    lines: int = Field(default=1, ge=1, le=64)
    last: str = ""
    timeout_s: float | None = Field(default=None, gt=0, le=30)


class Channel(Table):
    """Where a channel's value comes from: exactly one of ``read``, ``constant``, ``last_order``, ``integral_of``.

    ``read`` is a reading, or an expression of readings and of channels before this one (``channel.flow``). The value is
    then read * ``scale`` + ``offset``, in ``unit``. ``map`` goes from what is read to the value; ``bad`` from what is
    read to the reason why it is no value; ``fault`` is an expression that is true when the device calls it wrong.
    ``counts``: the device's counter may fall to 0 (or wrap at ``wraps_at``); the channel goes on counting.
    ``before``: what ``last_order`` says before the first order.
    """

    read: Formula = ""
    constant: float | None = None
    last_order: str = ""
    before: float | None = None
    integral_of: str = ""
    counts: bool = False
    wraps_at: float = Field(default=0.0, ge=0)
    scale: float = 1.0
    offset: float = 0.0
    unit: UnitName = ""
    map: dict[str, float] = Field(default_factory=dict)
    bad: dict[str, str] = Field(default_factory=dict)
    fault: Formula = ""
    signal: Literal["", "4-20mA", "pt100", "thermocouple-K", "thermocouple-T"] = ""
    span: tuple[float, float] | None = None
    cold_junction: Formula = ""


class Step(Table):
    """One exchange: a register write (``write``, ``set``), a block of them, or words (``send``, ``reply``, ``sample``).

    ``set`` is "value" (the order's value in ``unit``), a number, or an expression of it and of readings; on the wire
    stands (set - ``offset``) / ``scale``, or what ``map`` says. A step is left out unless ``when`` is true. It is said
    again when no answer came, but not with ``once`` (what does not state a target), nor in ``fill`` and ``swap``. Then:
    ``pause_s``; what was written is read back (``verify``); ``confirm`` is read and compared within ``tolerance``; it
    is waited until ``until`` is true. The last three have ``within_s`` for it.
    """

    write: str = ""
    set: NumberOrFormula = "value"
    block: dict[str, NumberOrFormula] = Field(default_factory=dict)
    verify: bool = True
    once: bool = False
    send: str = ""
    reply: str = ""
    sample: str = ""
    lines: int = Field(default=1, ge=1, le=64)
    last: str = ""
    timeout_s: float | None = Field(default=None, gt=0, le=30)
    scale: float = 1.0
    offset: float = 0.0
    unit: UnitName = ""
    map: dict[str, float] = Field(default_factory=dict)
    when: Formula = ""
    pause_s: Seconds = 0.0
    confirm: Formula = ""
    tolerance: float = Field(default=0.0, ge=0)
    until: Formula = ""
    within_s: Annotated[float, Field(ge=0, le=4)] = 0.0


class Order(Table):
    """The steps of one order, and the values in house units (mL/min, mL, degC, position) that the device takes."""

    steps: list[Step] = Field(min_length=1)
    range: tuple[float, float] | None = None


class Check(Table):
    """Proof of the stop: a register that holds ``equals`` (or one of a list), or words whose reply matches."""

    read: str = ""
    equals: float | list[float] = 0.0
    send: str = ""
    reply: str = ""
    sample: str = ""
    lines: int = Field(default=1, ge=1, le=64)


class StopTable(Table):
    """The last will. ``moves_nothing`` says why a device needs none."""

    steps: list[Step] = Field(default_factory=list)
    check: list[Check] = Field(default_factory=list)
    moves_nothing: str = ""


class Identity(Table):
    """Who answers; ``serial`` and ``firmware`` may be read. ``expect`` compares readings with numbers or texts."""

    maker: str = "unknown"
    model: str = "unknown"
    serial: Formula = ""
    firmware: Formula = ""
    expect: dict[str, float | str] = Field(default_factory=dict)


class PowerOn(Table):
    """How a restart shows: ``when`` is true; ``clear`` are the steps that forget it."""

    when: Formula
    clear: list[Step] = Field(default_factory=list)


class Requirement(Table):
    """What must be true at every poll, or the device counts as lost: e.g. that it is under remote control."""

    that: Formula
    remedy: str = Field(min_length=1)


class Fault(Table):
    """What the device calls wrong: while ``when`` is true, ``channels`` (all, if none is named) are bad."""

    when: Formula
    means: str = Field(min_length=1)
    channels: list[str] = Field(default_factory=list)


class ErrorQueue(Table):
    """A queue of errors, asked after every order until ``read`` is 0; what is in it is the device's "no"."""

    read: Formula
    text: Formula = ""


class Framing(Table):
    """How words are wrapped. Text keys take escapes of TOML (``"\\u0002"``) and ``{address}``.

    A frame is ``start``, length, ``address``, words, ``text_end``, checksum, ``end``. ``address`` (such as "{address}")
    is part of what the checksum covers, and a reply with another one is somebody else's. Said of replies only, or else
    as in requests: ``reply_start``, ``reply_address``, ``reply_end`` (one, or a list of prompts any of which ends a
    reply; with ``keep_end`` the pattern sees it), ``reply_checksum``. ``reply_size``: every reply has so many
    characters.
    """

    start: str = ""
    address: str = ""
    end: str = "\r"
    text_end: str = ""
    reply_start: str | None = None
    reply_address: str | None = None
    reply_end: str | list[str] | None = None
    keep_end: bool = False
    reply_size: int = Field(default=0, ge=0, le=1000)
    checksum: Literal[
        "none", "sum", "sum16", "sum-inverted", "xor", "lrc", "crc8", "crc16-modbus", "crc-ccitt", "crc-xmodem"
    ] = "none"
    checksum_form: Literal["hex", "hex-lower", "decimal", "high-first", "low-first"] = "hex"
    checksum_covers: Literal["words", "start", "end", "both"] = "words"
    reply_checksum: bool = True
    length: Literal["none", "byte", "hex2", "decimal2", "decimal3", "word", "word-low"] = "none"
    length_adds: int = Field(default=0, ge=-4, le=16)
    echo: bool = False
    decimal: Literal[".", ","] = "."


class CardLink(Table):
    """Protocol and timing. ``address_base``: 0 or 1 as the manual counts registers; 40001 where it writes 40001 for the
    first holding register (30001 input, 10001 discrete, 1 coil), 400001 with six digits.

    ``pause_s`` is kept before each exchange; ``busy_s`` is how long a busy device is asked again. The port settings
    are what the manual says: ``rigd card try`` uses them.
    """

    protocol: Literal["modbus-tcp", "modbus-rtu", "modbus-ascii", "text"]
    address_base: Literal[0, 1, 40001, 400001] = 0
    reply_timeout_s: float | None = Field(default=None, gt=0, le=30)
    pause_s: Annotated[float, Field(ge=0, le=2)] = 0.0
    busy_s: Annotated[float, Field(ge=0, le=4)] = 2.0
    baud: int = Field(default=115_200, ge=50, le=4_000_000)
    data_bits: Literal[7, 8] = 8
    parity: Literal["none", "even", "odd"] = "none"
    stop_bits: Literal[1, 2] = 1


class Card(Table):
    """One device as its manual tells it. ``continuous``: a pump without syringes; the card engine keeps the account of
    fillings that the daemon orders, so that it needs no channels ``level`` and ``standby`` and no order ``fill``.

    ``parameters`` are names with values that differ between devices of one kind; the rig file may set them anew, and
    what it says of a pump (``bore_mm``, ``stroke_mL``, ``rate_max_mL_min``, ``force_limit_N``) is known by that name.
    ``open`` is done before anything is asked, ``prepare`` after the identity, ``heartbeat`` after each poll.
    """

    schema_: Literal["rigd-card-1"] = Field(alias="schema")
    title: str
    family: Literal["pump", "valve", "chiller", "sensor"]
    continuous: bool = False
    link: CardLink
    framing: Framing = Field(default_factory=Framing)
    parameters: dict[str, float | str] = Field(default_factory=dict)
    identity: Identity = Field(default_factory=Identity)
    registers: dict[str, Register] = Field(default_factory=dict)
    questions: dict[str, Question] = Field(default_factory=dict)
    channels: dict[str, Channel]
    orders: dict[str, Order] = Field(default_factory=dict)
    stop: StopTable
    errors: dict[str, str] = Field(default_factory=dict)
    busy: dict[str, str] = Field(default_factory=dict)
    open: list[Step] = Field(default_factory=list)
    prepare: list[Step] = Field(default_factory=list)
    heartbeat: list[Step] = Field(default_factory=list)
    power_on: PowerOn | None = None
    require: list[Requirement] = Field(default_factory=list)
    faults: list[Fault] = Field(default_factory=list)
    error_queue: ErrorQueue | None = None

    @property
    def modbus(self) -> bool:
        """Whether this is a register map."""
        return self.link.protocol != "text"

    @property
    def all_steps(self) -> list[tuple[str, Step]]:
        """(key, step) of every step in the card."""
        groups = {f"orders.{name}.steps": order.steps for name, order in self.orders.items()}
        groups |= {"stop.steps": self.stop.steps, "open": self.open, "prepare": self.prepare}
        groups |= {"heartbeat": self.heartbeat, "power_on.clear": self.power_on.clear if self.power_on else []}
        return [(key, step) for key, steps in groups.items() for step in steps]
