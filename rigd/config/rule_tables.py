"""Sensors, interlocks, alarms, links, devices and who is told: the tables of a rig file that are not hardware."""

from typing import Annotated, Any, Literal, Self

from pydantic import ConfigDict, Field, ValidationInfo, field_validator, model_validator
from pydantic_core import PydanticCustomError

from rigd.config.quantity import Delay, Duration, Quantity, Written, pattern, read_quantity
from rigd.config.table import Flag, Id, IfMissing, Table, Text, Whole, ns
from rigd.model.devices import LinkSpec
from rigd.model.protection import Armed, OnBad
from rigd.model.rig import AlertChannel, MqttSpec

_QUANTITIES = ("pressure", "temperature", "flow", "volume", "mass", "fraction")
DIMENSION_OF = {name: name for name in _QUANTITIES} | {"state": ""}
"""What a sensor may measure, and the dimension of its value ("" = a state with labels)."""

COMPARISONS = ("above", "below", "equals", "differs_from", "disagrees_with", "rate_above", "mismatch_by", "quality")

EndOrPart = Annotated[str, Field(pattern=r"^[A-Za-z][A-Za-z0-9_-]*(\.[a-z]+)?$")]
TagText = Annotated[str, Field(min_length=1, max_length=120)]


def difference(dimension: str) -> str:
    """The dimension of a difference of two values: only temperatures have one of their own."""
    return "temperature difference" if dimension == "temperature" else dimension


def _span_by_kind(schema: dict[str, Any]) -> None:
    """What is measured decides the units of span and noise; a state has labels instead."""
    schema["allOf"] = [
        {"if": {"properties": {"measures": {"const": measures}}}, "then": _span_rule(dimension)}
        for measures, dimension in DIMENSION_OF.items()
    ]


def _span_rule(dimension: str) -> dict[str, Any]:
    if not dimension:
        return {"required": ["labels"], "properties": {"labels": {"minItems": 2}, "span": False}}
    span = {"items": {"pattern": pattern(dimension)}}
    noise = {"pattern": pattern(difference(dimension), "not negative")}
    return {
        "required": ["span"],
        "properties": {"labels": {"maxItems": 0}, "span": span, "noise": noise, "wander": noise},
    }


class SensorTable(Table):
    """One input of an instrument, read as the tag ``tag``. States have ``labels`` (value 0, 1, ...) and no span."""

    model_config = ConfigDict(json_schema_extra=_span_by_kind)

    tag: Id
    title: Text
    measures: Literal["pressure", "temperature", "flow", "volume", "mass", "fraction", "state"]
    at: EndOrPart
    span: tuple[Written, Written] | None = None
    labels: tuple[Text, ...] = ()
    device: Id
    channel: Text
    period: Duration | None = None
    stale_after: Duration | None = None
    noise: Written | None = None
    wander: Written | None = None
    lag: Delay = 0.0

    @field_validator("span")
    @classmethod
    def _span_in_unit(cls, span: tuple[str, str] | None, info: ValidationInfo) -> tuple[str, str] | None:
        dimension = DIMENSION_OF.get(info.data.get("measures", ""), "")
        if span and dimension:
            low, high = (read_quantity(end, dimension) for end in span)
            if low >= high:
                text = f"the span runs from {span[0]!r} to {span[1]!r}; the lower end comes first"
                raise PydanticCustomError("value-out-of-range", "{text}", {"text": text})
        return span

    @field_validator("noise", "wander")
    @classmethod
    def _noise_in_unit(cls, noise: str | None, info: ValidationInfo) -> str | None:
        dimension = DIMENSION_OF.get(info.data.get("measures", ""), "")
        if noise and dimension:
            read_quantity(noise, difference(dimension), "not negative")
        return noise

    @model_validator(mode="after")
    def _span_or_labels(self) -> Self:
        if self.measures == "state" and (self.span or len(self.labels) < 2):
            text = "a sensor of a state needs 'labels' (two or more, first for value 0) and no 'span'"
            raise PydanticCustomError("span-or-labels", "{text}", {"text": text})
        if self.measures != "state" and (self.labels or not self.span):
            text = f"a sensor of {self.measures} needs 'span' (lowest and highest value) and no 'labels'"
            raise PydanticCustomError("span-or-labels", "{text}", {"text": text})
        return self

    @property
    def limits(self) -> tuple[float, float]:
        """Span in house units; of a state, its first and last value."""
        if self.span is None:
            return 0.0, float(len(self.labels) - 1)
        dimension = DIMENSION_OF[self.measures]
        return read_quantity(self.span[0], dimension), read_quantity(self.span[1], dimension)

    @property
    def noise_house(self) -> float:
        """One standard deviation in house units; 0 when not given."""
        return self._house(self.noise)

    @property
    def wander_house(self) -> float:
        """Standard deviation of the slow drift in house units; 0 when not given."""
        return self._house(self.wander)

    def _house(self, written: str | None) -> float:
        if written is None or self.measures == "state":
            return 0.0
        return read_quantity(written, difference(DIMENSION_OF[self.measures]))


def _one_comparison(schema: dict[str, Any]) -> None:
    schema["oneOf"] = [{"required": [name]} for name in COMPARISONS]
    schema["dependentRequired"] = {"differs_from": ["by"], "disagrees_with": ["by"], "window": ["rate_above"]}
    schema["dependentSchemas"] = {
        "by": {"anyOf": [{"required": [name]} for name in ("differs_from", "disagrees_with")]}
    }


class ConditionTable(Table):
    """A tag and exactly one comparison.

    above, below, equals; differs_from another tag, such as a set-point, ``by`` so much; disagrees_with a second
    instrument of the same quantity ``by`` so much; rate_above (with window); mismatch_by: not what the unit was told;
    quality: what makes the signal unbelievable.
    """

    model_config = ConfigDict(json_schema_extra=_one_comparison)

    tag: TagText
    above: Written | None = None
    below: Written | None = None
    equals: Text | Whole | None = None
    differs_from: TagText | None = None
    disagrees_with: TagText | None = None
    by: Written | None = None
    rate_above: Written | None = None
    window: Duration | None = None
    mismatch_by: Written | None = None
    quality: Literal["bad", "stale", "frozen", "out of span", "diagnostic"] | None = None
    deadband: Written | None = None

    @model_validator(mode="after")
    def _one(self) -> Self:
        given = [name for name in COMPARISONS if getattr(self, name) is not None]
        text = ""
        if len(given) != 1:
            found = " and ".join(given) or "none"
            text = f"found {found}; a condition needs exactly one of {', '.join(COMPARISONS)}"
        elif (self.by is None) == (self.other is not None):
            pair = "{tag, differs_from = another tag, by = how much}"
            text = f"'differs_from' (or 'disagrees_with') and 'by' belong together: {pair}"
        elif self.window is not None and self.rate_above is None:
            text = "'window' belongs to 'rate_above' only"
        if text:
            raise PydanticCustomError("condition-wrong", "{text}", {"text": text})
        return self

    @property
    def other(self) -> str | None:
        """The tag with which this one is compared."""
        return self.differs_from or self.disagrees_with


class InterlockTable(Table):
    """A rule that stops the rig and latches until a person resets it.

    ``disagree_by`` and ``disagree_for``: channels of one quantity that are this far apart for so long; the one that
    disagrees with all others counts as bad. ``startup``: limits do not count for so long after the first movement since
    a reset. ``proof_test``: time between two proof tests, without which no unattended run starts.
    """

    id: Id
    title: Text
    trip_when: Annotated[tuple[ConditionTable, ...], Field(min_length=1)]
    vote: Annotated[str, Field(pattern=r"^[1-9][0-9]?oo[1-9][0-9]?$")] | None = None
    on_bad: OnBad = OnBad.TRIP
    delay: Delay = 0.0
    clear_delay: Delay = 1.0
    settling: Delay = 0.0
    stop: Literal["cut", "quench", "hold"]
    armed: Armed = Armed.ALWAYS
    disagree_by: Written | None = None
    disagree_for: Duration = 10.0
    startup: Delay = 0.0
    proof_test: Duration = 90 * 86_400.0
    consequence: Annotated[Text, IfMissing("key-missing", "say what would happen without this interlock")]
    response: Annotated[Text, IfMissing("key-missing", "say what the person should do after the trip")]
    basis: Text


def _urgency(schema: dict[str, Any]) -> None:
    """A priority is stated, or follows from what the alarm leads to."""
    schema["anyOf"] = [{"required": ["priority"]}, {"required": ["leads_to"]}]
    trip = {"properties": {"leads_to": {"const": "trip"}}, "required": ["leads_to"]}
    schema["if"], schema["then"] = trip, {"required": ["respond_within"]}


class AlarmTable(Table):
    """A condition that needs a person; ``action`` says what to do.

    ``leads_to`` and ``respond_within`` say what comes if nobody acts, and when; the priority follows from them, and may
    then be left out.

    ``suppress_when`` hides it as long as that holds; ``realarm`` tells it again while it stands; ``shelve_max`` is the
    longest that a person may shelve it (an alarm of the highest priority is never shelved).
    """

    model_config = ConfigDict(json_schema_extra=_urgency)

    id: Id
    title: Text
    when: ConditionTable
    on_delay: Delay = 0.0
    off_delay: Delay = 0.0
    priority: Literal["highest", "high", "medium", "low"] | None = None
    leads_to: Literal["lost protection", "trip", "lost run", "maintenance"] | None = None
    respond_within: Duration | None = None
    action: Annotated[
        Text,
        IfMissing("alarm-without-action", "say what the person should do; if there is nothing to do, remove the alarm"),
    ]
    cause: str = ""
    consequence: str = ""
    latching: Flag = False
    acknowledge: Flag = True
    hold: Flag = False
    suppress_when: ConditionTable | None = None
    realarm: Duration | None = None
    shelve_max: Delay = 8 * 3600.0

    @model_validator(mode="after")
    def _stated(self) -> Self:
        text = ""
        if self.priority is None and self.leads_to is None:
            text = "an alarm needs a 'priority', or 'leads_to' from which it follows"
        elif self.leads_to == "trip" and self.respond_within is None:
            text = "an alarm that leads to a trip needs 'respond_within': how long a person has"
        if text:
            raise PydanticCustomError("urgency-missing", "{text}", {"text": text})
        return self

    @property
    def follows(self) -> str | None:
        """The priority that follows from consequence and time (own proposal, after the practice of ISA-18.2)."""
        if self.leads_to == "trip":
            return "high" if (self.respond_within or 0.0) < SOON_S else "medium"
        return None if self.leads_to is None else URGENCY[self.leads_to]

    @property
    def urgency(self) -> int:
        """The priority as a number, 1 the most urgent."""
        return PRIORITIES[self.priority or self.follows or "medium"]


SOON_S = 1800.0
"""A trip that comes sooner than this unless somebody acts is worth waking a person."""
URGENCY = {"lost protection": "highest", "lost run": "medium", "maintenance": "low"}


class LinkTable(Table):
    """A port: a path, a URL such as ``socket://host:port``, or the word ``simulated``."""

    id: Id
    port: Text
    baud: Annotated[float, Quantity("baud", "positive")] = 115200.0
    data_bits: Annotated[int, Field(strict=True, ge=5, le=8)] = 8
    parity: Literal["none", "even", "odd"] = "none"
    stop_bits: Annotated[float, Field(strict=True, ge=1, le=2, multiple_of=0.5)] = 1.0
    reply_timeout: Duration = 0.3
    retries: Annotated[int, Field(strict=True, ge=0, le=20)] = 2

    def value(self) -> LinkSpec:
        return LinkSpec(
            id=self.id,
            port=self.port,
            baud=round(self.baud),
            data_bits=self.data_bits,
            parity=self.parity,
            stop_bits=self.stop_bits,
            reply_timeout_s=self.reply_timeout,
            retries=self.retries,
        )


DEEPEST_OPTION = 6


def _depth(value: object) -> int:
    """How many containers lie in each other."""
    depth, layer = 0, [value]
    while layer:
        layer = [item for holder in layer if isinstance(holder, (dict, list)) for item in _items(holder)]
        depth += 1
    return depth


def _items(holder: dict[str, object] | list[object]) -> list[object]:
    return list(holder.values()) if isinstance(holder, dict) else holder


class DeviceTable(Table):
    """An instrument or actuator on a link. ``options`` are for its driver and checked by it.

    ``last_resort``: its stop takes the drive power away (an enable output); the guard sends it when another device does
    not confirm that it stopped.
    """

    id: Id
    driver: Text
    dialect: str = ""
    link: Id
    address: str = ""
    period: Duration = 1.0
    stale_after: Duration | None = None
    serial_no: str = ""
    last_resort: Annotated[bool, Field(strict=True)] = False
    options: dict[str, Any] = Field(default_factory=dict)

    @field_validator("options")
    @classmethod
    def _flat_enough(cls, options: dict[str, Any]) -> dict[str, Any]:
        if _depth(options) > DEEPEST_OPTION:
            text = f"options are nested more than {DEEPEST_OPTION} levels deep"
            raise PydanticCustomError("value-out-of-range", "{text}", {"text": text})
        return options

    @property
    def period_ns(self) -> int:
        """How often its channels are read."""
        return ns(self.period)

    @property
    def stale_ns(self) -> int:
        """When its values are too old; five periods unless the file says so."""
        return ns(5 * self.period if self.stale_after is None else self.stale_after)


class MqttTable(Table):
    """A broker for telemetry. The password is read from the environment variable ``password_env``."""

    host: Text
    port: Annotated[int, Field(strict=True, ge=1, le=65535)] = 1883
    prefix: Annotated[str, Field(pattern=r"^[A-Za-z0-9_-]+(/[A-Za-z0-9_-]+)*$")] = "rigd"
    username: str = ""
    password_env: str = ""
    keepalive: Annotated[float, Quantity("time", "positive"), Field(ge=1, le=3600)] = 10.0

    def value(self) -> MqttSpec:
        return MqttSpec(self.host, self.port, self.prefix, self.username, self.password_env, round(self.keepalive))


class AlertTable(Table):
    """Where alerts go: a URL of the notification library, or a plain webhook."""

    name: Id
    url: Annotated[str, Field(pattern=r"^[A-Za-z][A-Za-z0-9+.-]*://\S+$")]
    priority_at_least: Literal["highest", "high", "medium", "low"] = "high"

    def value(self) -> AlertChannel:
        return AlertChannel(self.name, self.url, PRIORITIES[self.priority_at_least])


PRIORITIES = {"highest": 1, "high": 2, "medium": 3, "low": 4}


class OutsideTable(Table):
    """Who is told: broker and alert channels."""

    mqtt: MqttTable | None = None
    alerts: tuple[AlertTable, ...] = ()
