"""What must hold between the tables of a card: references, samples, channels, orders, a stop. Pure."""

from __future__ import annotations

import re
from collections.abc import Iterable, Iterator
from difflib import get_close_matches

from rigd.model.devices import LinkSpec
from rigd.model.errors import RigError
from rigd.model.orders import Action
from rigd_drivers.card import text
from rigd_drivers.card.expressions import ExpressionError, Value, parse
from rigd_drivers.card.model import MUST, NEEDED, ORDERS, Card, Channel, Question, Step
from rigd_drivers.card.words import Words

Finding = tuple[str, str, str]
"""key, what was found, remedy"""

RESERVED = {"value", "address", "count", "number", "channel"}
SOURCES = "use one of read, constant, last_order, integral_of"


def findings(card: Card) -> list[Finding]:
    """All mistakes of a card whose single tables are right."""
    found = [*_kind(card), *_names(card), *_patterns(card)]
    if found:  # patterns that cannot be read have no fields to refer to
        return found
    found = [*_channels(card), *_orders(card), *_steps(card), *_signs(card), *_stop(card), *_places(card)]
    return found or list(_will(card))


def _kind(card: Card) -> Iterator[Finding]:
    if card.continuous and (card.family != "pump" or {"level", "standby"} & set(card.channels)):
        yield "continuous", "only for a pump, without channels level and standby", "remove one of them"
    if card.modbus and (card.questions or card.errors or card.busy):
        yield "questions", "questions, errors and busy are for text", "use [registers.NAME]"
    if not card.modbus and card.registers:
        yield "registers", "registers are for Modbus", "use [questions.NAME] with send, reply and sample"
    framing = card.framing
    if not card.modbus and not (framing.end or framing.text_end or framing.length != "none" or framing.reply_size):
        yield "framing.end", "nothing says where a message ends", "add end, text_end, length or reply_size"
    for name in card.channels if card.family != "sensor" else ():
        if name not in NEEDED[card.family]:
            known = NEEDED[card.family]
            yield f"channels.{name}", f"a {card.family} has no channel {name!r}", _allowed(name, known)


def _names(card: Card) -> Iterator[Finding]:
    for table, names in (("registers", card.registers), ("questions", card.questions), ("parameters", card.parameters)):
        for name in names:
            if not re.fullmatch(r"[A-Za-z_]\w*", name) or name in RESERVED or not _parses(name):
                remedy = f"letters, digits and _; not {', '.join(sorted(RESERVED))} nor a word such as if"
                yield f"{table}.{name}", f"{name!r} cannot be a name", remedy


def _parses(name: str) -> bool:
    try:
        return parse(name).names == {name}
    except ExpressionError:
        return False


def _patterns(card: Card) -> Iterator[Finding]:
    said: list[tuple[str, Question | Step]] = [(f"questions.{name}", item) for name, item in card.questions.items()]
    said += [(key, step) for key, step in card.all_steps if step.reply or step.send]
    said += [("stop.check", Question(send=one.send, reply=one.reply, sample=one.sample, lines=one.lines))
             for one in card.stop.check if one.send]  # fmt: skip
    for key, item in said:
        yield from _templates(key, item)
        yield from _pattern(f"{key}.reply", item.reply, item.sample)
        if item.last and not _reads(item.last):
            yield f"{key}.last", f"pattern {item.last!r} is wrong", "write a regular expression"
    for table, patterns in (("errors", card.errors), ("busy", card.busy)):
        for pattern in patterns:
            if not _reads(pattern):
                yield f"{table}.{pattern}", f"pattern {pattern!r} is wrong", "write a regular expression"


def _reads(pattern: str) -> re.Pattern[str] | None:
    """The pattern with 1 for every slot; ``None`` when it cannot be read."""
    try:
        return re.compile(text.fill_pattern(pattern, _Ones()))
    except (re.error, ValueError, RigError):
        return None


def _templates(key: str, item: Question | Step) -> Iterator[Finding]:
    try:
        text.slots(item.send)
    except ValueError as error:
        yield f"{key}.send", f"{item.send!r}: {error}", "write {value:.3f} or {address}; a brace itself is {{"


def _pattern(key: str, pattern: str, sample: str) -> Iterator[Finding]:
    compiled = _reads(pattern)
    if compiled is None:
        yield key, f"pattern {pattern!r} is wrong", "write a regular expression in 'single quotes'"
        return
    if not sample and pattern:
        yield key, "the pattern has no sample", "add sample = a reply as the manual prints it"
        return
    sample = sample.replace("{address}", "1")
    if compiled.fullmatch(sample) is None and compiled.fullmatch(sample.strip()) is None:
        yield key, f"pattern {pattern!r} does not match its sample {sample!r}", "correct one of the two"


class _Ones(dict[str, Value]):
    """1 for every name."""

    def __missing__(self, name: str) -> Value:
        return "1"


def readings(card: Card) -> list[str]:
    """All readings that a card declares: registers, or ``question.field``."""
    if card.modbus:
        return list(card.registers)
    return [
        f"{name}.{field}" for name, item in card.questions.items() for field in re.compile(
            text.fill_pattern(item.reply, _Ones())).groupindex
    ]  # fmt: skip


def _formula(card: Card, key: str, formula: str, more: Iterable[str] = ()) -> Iterator[Finding]:
    """Names of an expression that nothing declares."""
    known = [*readings(card), *card.parameters, "address", "count", *more]
    for name in sorted(parse(formula).names - set(known)) if formula else ():
        yield key, f"{name!r} is not declared", _allowed(name, [one for one in known if one not in RESERVED])


def _allowed(name: str, known: Iterable[str]) -> str:
    names = list(known)
    near = get_close_matches(name, names, n=1, cutoff=0.5)
    return f"{f'did you mean {near[0]!r}? ' if near else ''}allowed: {', '.join(names) or 'none yet'}"


def _channels(card: Card) -> Iterator[Finding]:
    for name in NEEDED[card.family]:
        if name not in card.channels and not (card.continuous and name in ("level", "standby")):
            yield f"channels.{name}", f"channel {name!r} is missing", SOURCES
    for name, channel in card.channels.items():
        yield from _channel(card, name, channel)


def _channel(card: Card, name: str, channel: Channel) -> Iterator[Finding]:
    key = f"channels.{name}"
    ways = [channel.read, channel.constant is not None, channel.last_order, channel.integral_of]
    if sum(map(bool, ways)) != 1:
        yield key, f"{sum(map(bool, ways))} sources", SOURCES
    earlier = list(card.channels)[: list(card.channels).index(name)]
    for part, formula in (("read", channel.read), ("fault", channel.fault), ("cold_junction", channel.cold_junction)):
        yield from _formula(card, f"{key}.{part}", formula, [f"channel.{other}" for other in earlier])
    if channel.integral_of and channel.integral_of not in earlier:
        yield key, f"{channel.integral_of!r} is no channel before {name!r}", _allowed(channel.integral_of, earlier)
    if channel.last_order and channel.last_order not in {action.value for action in ORDERS[card.family]}:
        actions = sorted(action.value for action in ORDERS[card.family])
        yield f"{key}.last_order", f"no order {channel.last_order!r}", _allowed(channel.last_order, actions)
    if channel.signal == "4-20mA" and channel.span is None:
        yield f"{key}.span", "a 4-20 mA input needs the span of its transmitter", "add span = [at 4 mA, at 20 mA]"


def _orders(card: Card) -> Iterator[Finding]:
    allowed = sorted(action.value for action in ORDERS[card.family])
    for name in card.orders:
        if name not in allowed:
            yield f"orders.{name}", f"a {card.family} has no order {name!r}", _allowed(name, allowed)
    circulates = "circulating" in card.channels and card.channels["circulating"].constant is not None
    for action in sorted(MUST[card.family] - {Action.STOP} - ({Action.CIRCULATE} if circulates else set())):
        if action.value not in card.orders:
            yield f"orders.{action.value}", f"order {action.value!r} is missing", "declare its steps"


def _steps(card: Card) -> Iterator[Finding]:
    numbers: dict[str, int] = {}
    for group, step in card.all_steps:
        key = f"{group}.{numbers.setdefault(group, 0)}"
        numbers[group] += 1
        yield from _step(card, key, step)
        for part, formula in (("when", step.when), ("set", step.set), ("until", step.until)):
            if isinstance(formula, str):
                yield from _formula(card, f"{key}.{part}", formula, ["value"])
        yield from _formula(card, f"{key}.confirm", step.confirm)
        for expression, _ in text.slots(step.send):
            yield from _formula(card, f"{key}.send", expression.text, ["value", "number"])
        if step.until and not step.within_s:
            yield f"{key}.until", "without a time", "add within_s, at most 4"


def _step(card: Card, key: str, step: Step) -> Iterator[Finding]:
    if not (step.write or step.block or step.send or step.until or step.pause_s):
        does = "write or block" if card.modbus else "send"
        yield key, "a step that does nothing", f"add {does}, until or pause_s"
    if step.send if card.modbus else step.write or step.block:
        does, other = ("write and set", "send") if card.modbus else ("send, reply and sample", "write")
        yield key, f"{other} is not for this protocol", f"use {does}"
        return
    for name in [step.write] if step.write else step.block:
        if name not in card.registers:
            yield key, f"writes {name!r}", _allowed(name, card.registers)
        elif card.registers[name].table not in ("coil", "holding"):
            yield key, f"register {name!r} cannot be written", "only coil and holding can"
        elif step.block and (card.registers[name].table != "holding" or card.registers[name].bit is not None):
            yield key, f"{name!r} cannot be part of a block", "only whole holding registers can"
    for name, formula in step.block.items():
        if isinstance(formula, str):
            yield from _formula(card, f"{key}.block.{name}", formula, ["value"])


def _signs(card: Card) -> Iterator[Finding]:
    """Identity, power-on sign, requirements, faults, error queue."""
    identity, sign, queue = card.identity, card.power_on, card.error_queue
    for name in identity.expect:
        yield from _formula(card, f"identity.expect.{name}", name)
    formulas = [("identity.serial", identity.serial), ("identity.firmware", identity.firmware)]
    formulas += [("power_on.when", sign.when)] if sign else []
    formulas += [("error_queue.read", queue.read), ("error_queue.text", queue.text)] if queue else []
    formulas += [(f"require.{n}.that", one.that) for n, one in enumerate(card.require)]
    formulas += [(f"faults.{n}.when", one.when) for n, one in enumerate(card.faults)]
    for key, formula in formulas:
        yield from _formula(card, key, formula)
    for n, fault in enumerate(card.faults):
        for name in fault.channels:
            if name not in card.channels:
                yield f"faults.{n}.channels", f"no channel {name!r}", _allowed(name, card.channels)


def _stop(card: Card) -> Iterator[Finding]:
    stop = card.stop
    if not stop.steps and card.family == "pump":
        yield "stop", "a pump must say how it stops", "add steps and check to [stop]"
    elif not stop.steps and not stop.moves_nothing:
        yield "stop", "nothing is said about stopping", "add steps to [stop], or moves_nothing = 'why it may stay'"
    if stop.steps and not stop.check:
        yield "stop.check", "a stop without a check", "add check: what the device answers when it has stopped"
    for n, step in enumerate(stop.steps):
        names = parse(step.set).names if isinstance(step.set, str) and step.set != "value" else frozenset()
        names |= frozenset().union(*(expression.names for expression, _ in text.slots(step.send)))
        said = "value" in names or (step.set == "value" and bool(step.write))
        if said or names & set(readings(card)) or step.when or step.map:
            remedy = "the guard sends it when nobody is left to think: constants, {address} and parameters only"
            yield f"stop.steps.{n}", "a stop with a value, a reading or a condition", remedy
        item = card.registers.get(step.write)
        if item is not None and item.bit is not None and item.write != "mask":
            yield f"stop.steps.{n}", "one bit of a word", "add write = 'mask' to the register, or write the whole word"
    for n, check in enumerate(stop.check):
        if card.modbus and check.read not in card.registers:
            yield f"stop.check.{n}", f"reads {check.read!r}", _allowed(check.read, card.registers)
        elif not card.modbus and not (check.send and check.reply):
            yield f"stop.check.{n}", "a check without send and reply", "add send, reply and sample"


def _places(card: Card) -> Iterator[Finding]:
    for name, register in card.registers.items():
        key = f"registers.{name}"
        if (register.kind == "bit") != (register.table in ("coil", "discrete")):
            yield f"{key}.type", f"{register.table} with type {register.kind}", "bit is for coil and discrete"
        if register.bit is not None and register.kind != "u16":
            yield f"{key}.bit", f"a bit of a {register.kind}", "leave type out; one bit of one 16-bit word"
        if (register.kind == "text") != (register.length > 0):
            yield f"{key}.length", "a text has length = so many registers, nothing else has", "correct one of the two"
        if isinstance(register.address, str):
            yield from _formula(card, f"{key}.address", register.address)


def _will(card: Card) -> Iterator[Finding]:
    """Compile the last will, so that what cannot be said is told now."""
    try:
        words = Words(card, "1", {})
        for name in card.registers:
            if not 0 <= words.place(name).address <= 65535:
                yield (
                    f"registers.{name}.address", f"is {words.place(name).address} on the wire",
                    "0 to 65535; see link.address_base",
                )  # fmt: skip
        words.last_will("check", LinkSpec("check", ""))
    except (RigError, ValueError, KeyError) as error:
        yield "stop", f"cannot be made into bytes: {error}", "correct the step or the register it names"
