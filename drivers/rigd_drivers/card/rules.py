"""What must hold between the tables of a card: references, samples, channels, orders, a stop. Pure."""

from __future__ import annotations

import re
from collections.abc import Iterator

from rigd.model.orders import Action
from rigd_drivers.card.model import MUST, NEEDED, ORDERS, Card, Channel
from rigd_drivers.card.text import fill_pattern

Finding = tuple[str, str, str]
"""key, what was found, remedy"""


def findings(card: Card) -> list[Finding]:
    """All mistakes of a card whose single tables are right."""
    return [
        *_kind(card),
        *_patterns(card),
        *_channels(card),
        *_orders(card),
        *_steps(card),
        *_stop(card),
        *_places(card),
    ]


def _kind(card: Card) -> Iterator[Finding]:
    if card.continuous and (card.family != "pump" or {"level", "standby"} & set(card.channels)):
        yield "continuous", "only for a pump, without channels level and standby", "remove one of them"
    if card.modbus and (card.questions or card.errors or card.busy):
        yield "questions", "questions, errors and busy are for text", "use [registers.NAME]"
    if not card.modbus and card.registers:
        yield "registers", "registers are for Modbus", "use [questions.NAME] with send, reply and sample"
    for name in card.channels if card.family != "sensor" else ():
        if name not in NEEDED[card.family]:
            yield (
                f"channels.{name}",
                f"a {card.family} has no channel {name!r}",
                "allowed: " + ", ".join(NEEDED[card.family]),
            )


def _patterns(card: Card) -> Iterator[Finding]:
    found = [(f"questions.{name}.reply", item.reply, item.sample) for name, item in card.questions.items()]
    found += [(f"{key}.reply", step.reply, step.sample) for key, step in card.all_steps if step.reply or step.send]
    found += [("stop.check.reply", check.reply, check.sample) for check in card.stop.check if check.send]
    found += [(f"errors.{pattern}", pattern, "") for pattern in (*card.errors, *card.busy)]
    for key, pattern, sample in found:
        try:
            good = re.compile(fill_pattern(pattern, "1")).fullmatch(sample.replace("{address}", "1"))
        except re.error as error:
            yield key, f"pattern {pattern!r} is wrong: {error}", "write a regular expression"
            continue
        if key.startswith("errors."):
            continue
        if not sample and pattern:
            yield key, "the pattern has no sample", "add sample = a reply as the manual prints it"
        elif good is None:
            yield key, f"pattern {pattern!r} does not match its sample {sample!r}", "correct one of the two"


def known_reading(card: Card, name: str) -> bool:
    """Whether ``name`` is a register, or ``question.field``."""
    if card.modbus:
        return name in card.registers
    question, _, field = name.partition(".")
    item = card.questions.get(question)
    return item is not None and field in re.compile(fill_pattern(item.reply, "1")).groupindex


def _channels(card: Card) -> Iterator[Finding]:
    for name in NEEDED[card.family]:
        if name not in card.channels and not (card.continuous and name in ("level", "standby")):
            yield (
                f"channels.{name}",
                f"channel {name!r} is missing",
                ("read it, or use constant, last_order, integral_of or sum"),
            )
    for name, channel in card.channels.items():
        yield from _channel(card, name, channel)


def _channel(card: Card, name: str, channel: Channel) -> Iterator[Finding]:
    key = f"channels.{name}"
    ways = [channel.read, channel.constant is not None, channel.last_order, channel.integral_of, channel.sum]
    if sum(map(bool, ways)) != 1:
        yield key, f"{sum(map(bool, ways))} sources", "use one of read, constant, last_order, integral_of, sum"
    if channel.read and not _safe_reading(card, channel.read):
        yield f"{key}.read", f"{channel.read!r} is not declared", _readings(card)
    others = [*channel.sum, *([channel.integral_of] if channel.integral_of else [])]
    earlier = list(card.channels)[: list(card.channels).index(name)]
    for other in others:
        if other not in earlier:
            yield key, f"{other!r} is no channel declared before {name!r}", f"allowed: {', '.join(earlier) or 'none'}"
    if channel.signal == "4-20mA" and channel.span is None:
        yield f"{key}.span", "a 4-20 mA input needs the span of its transmitter", "add span = [at 4 mA, at 20 mA]"


def _safe_reading(card: Card, name: str) -> bool:
    try:
        return known_reading(card, name)
    except re.error:
        return True


def _readings(card: Card) -> str:
    names = list(card.registers) or [f"{name}.FIELD" for name in card.questions]
    return f"allowed: {', '.join(names) or 'none yet'}"


def _orders(card: Card) -> Iterator[Finding]:
    allowed = ", ".join(sorted(action.value for action in ORDERS[card.family])) or "none"
    for name in card.orders:
        if name not in {action.value for action in ORDERS[card.family]}:
            yield f"orders.{name}", f"a {card.family} has no order {name!r}", f"allowed: {allowed}"
    for action in sorted(MUST[card.family] - {Action.STOP}):
        if action.value not in card.orders:
            yield f"orders.{action.value}", f"order {action.value!r} is missing", "declare its steps"


def _steps(card: Card) -> Iterator[Finding]:
    for key, step in card.all_steps:
        if card.modbus and step.write not in card.registers:
            yield key, f"writes {step.write!r}", _readings(card)
        elif card.modbus and card.registers[step.write].table not in ("coil", "holding"):
            yield key, f"register {step.write!r} cannot be written", "only coil and holding can"
        if not card.modbus and not step.send:
            yield key, "a step without send", "add send, reply and sample"
        if step.confirm and not _safe_reading(card, step.confirm):
            yield key, f"confirm {step.confirm!r} is not declared", _readings(card)


def _stop(card: Card) -> Iterator[Finding]:
    stop = card.stop
    if not stop.steps and card.family == "pump":
        yield "stop", "a pump must say how it stops", "add [[stop.steps]] and [[stop.check]]"
    elif not stop.steps and not stop.moves_nothing:
        yield "stop", "nothing is said about stopping", "add [[stop.steps]], or moves_nothing = 'why it may stay'"
    if stop.steps and not stop.check:
        yield "stop.check", "a stop without a check", "add [[stop.check]]: what the device answers when it has stopped"
    for step in stop.steps:
        if step.set == "value" and (card.modbus or "{value" in step.send):
            yield "stop.steps", "a stop has no value", "write set = 0 (a number), or words without {value}"
    for check in stop.check:
        if card.modbus and check.read not in card.registers:
            yield "stop.check", f"reads {check.read!r}", _readings(card)


def _places(card: Card) -> Iterator[Finding]:
    for name, register in card.registers.items():
        if register.address < card.link.address_base:
            yield f"registers.{name}.address", "0 is not possible when addresses count from 1", "correct it"
        if (register.type == "bit") != (register.table in ("coil", "discrete")):
            yield f"registers.{name}.type", f"{register.table} with type {register.type}", "bit for coil and discrete"
