"""Arithmetic that a card may write: ``hex(now.temp) / 100``, ``status & 4``, ``0 if c0 else 1 if c1 else -1``. Pure.

The grammar is that of Python expressions, cut down to numbers, texts, names with one dot, arithmetic, bits,
comparisons, ``and or not``, ``a if b else c`` and the functions of ``FUNCTIONS``. Nothing else is ever evaluated.
"""

from __future__ import annotations

import ast
import operator
import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from functools import cache

from rigd.model.errors import DeviceProtocolError

Value = float | str
LONGEST_TEXT = 300


class ExpressionError(ValueError):
    """An expression that a card cannot say; its text is for the author of the card."""


def number(text: Value) -> float:
    """A plain decimal number, exponents of two digits allowed. SCPI's 9.9E37 and 9.91E37 (1999, 7.2.1.4: infinity,
    not a number) are ``nan``; whatever is no number raises ``DeviceProtocolError``."""
    if not isinstance(text, str):
        return float(text)
    if re.fullmatch(r"\s*[-+]?(?:\d+\.?\d*|\.\d+)(?:[eE][-+]?\d{1,2})?\s*", text, re.ASCII) is None:
        raise DeviceProtocolError(f"{text!r} is not a number")
    found = float(text)
    return found if abs(found) < 9.8e37 else float("nan")


def _whole(value: Value) -> int:
    found = number(value)
    if abs(found) > 2**64 or found != found:
        raise DeviceProtocolError(f"{found:g} has no bits")
    return round(found)


def _hex(text: Value) -> float:
    digits = text.strip() if isinstance(text, str) else f"{text:g}"
    if re.fullmatch(r"[0-9A-Fa-f]{1,16}", digits, re.ASCII) is None:
        raise DeviceProtocolError(f"{text!r} is not a hexadecimal number")
    return float(int(digits, 16))


def _signed(value: Value, bits: Value) -> float:
    size = _whole(bits)
    whole = _whole(value) & ((1 << size) - 1)
    return float(whole - (1 << size) if whole >> (size - 1) else whole)


def _hex_signed(text: Value) -> float:
    return _signed(_hex(text), 4 * len(str(text).strip()))


def _big(text: Value) -> float:
    return float(int.from_bytes(str(text).encode("latin-1"), "big"))


def _little(text: Value) -> float:
    return float(int.from_bytes(str(text).encode("latin-1"), "little"))


FUNCTIONS: Mapping[str, Callable[..., float]] = {
    "abs": lambda value: abs(number(value)),
    "big": _big,
    "hex": _hex,
    "hex_signed": _hex_signed,
    "little": _little,
    "max": lambda *values: max(number(value) for value in values),
    "min": lambda *values: min(number(value) for value in values),
    "number": number,
    "round": lambda value: float(round(number(value))),
    "signed": _signed,
}
"""``hex`` and ``hex_signed`` read hexadecimal digits; ``big`` and ``little`` bytes as an unsigned number;
``signed(n, 16)`` reads 16 bits as two's complement."""

_ARITHMETIC: Mapping[type[ast.operator], Callable[[float, float], float]] = {
    ast.Add: operator.add, ast.Sub: operator.sub, ast.Mult: operator.mul, ast.Div: operator.truediv,
    ast.FloorDiv: operator.floordiv, ast.Mod: operator.mod,
}  # fmt: skip
_BITS: Mapping[type[ast.operator], Callable[[int, int], int]] = {
    ast.BitAnd: operator.and_, ast.BitOr: operator.or_, ast.BitXor: operator.xor,
}  # fmt: skip
_COMPARE: Mapping[type[ast.cmpop], Callable[[object, object], bool]] = {ast.Eq: operator.eq, ast.NotEq: operator.ne}
_ORDERED: Mapping[type[ast.cmpop], Callable[[float, float], bool]] = {
    ast.Lt: operator.lt, ast.LtE: operator.le, ast.Gt: operator.gt, ast.GtE: operator.ge,
}  # fmt: skip


@dataclass(frozen=True, slots=True)
class Expression:
    """One of them, parsed. ``names`` are what it must be given, such as ``status`` or ``now.flow``."""

    text: str
    names: frozenset[str]
    node: ast.expr

    def __call__(self, known: Mapping[str, Value]) -> Value:
        """The value. Raises ``DeviceProtocolError`` when what the device said makes no sense in it."""
        try:
            found = _evaluate(self.node, known)
        except (ZeroDivisionError, OverflowError, ValueError) as error:
            raise DeviceProtocolError(f"{self.text!r} cannot be worked out: {error}") from None
        return found if isinstance(found, str) else float(found)

    def true(self, known: Mapping[str, Value]) -> bool:
        """Whether the value counts as yes: a number other than 0, a text that is not empty."""
        return bool(self(known))


@cache
def parse(text: str) -> Expression:
    """The expression of a text; ``ExpressionError`` says what cannot be read."""
    if len(text) > LONGEST_TEXT:
        raise ExpressionError(f"longer than {LONGEST_TEXT} characters")
    try:
        node = ast.parse(text.strip(), mode="eval").body
    except (SyntaxError, ValueError, RecursionError, MemoryError):
        raise ExpressionError(f"{text!r} is no expression; names are letters, digits and _") from None
    return Expression(text, frozenset(_names(node)), node)


def _names(node: ast.expr) -> set[str]:
    """Names below a node; raises for what is not allowed, so that it is told when the card is read."""
    match node:
        case ast.Constant(value=bool() | int() | float() | str()):
            return set()
        case ast.Name(id=name):
            return {name}
        case ast.Attribute(value=ast.Name(id=name), attr=field):
            return {f"{name}.{field}"}
        case ast.UnaryOp(op=ast.USub() | ast.UAdd() | ast.Not() | ast.Invert(), operand=one):
            return _names(one)
        case ast.BinOp(left=left, op=op, right=right) if _known_operator(op):
            return _names(left) | _names(right)
        case ast.BoolOp(values=values):
            return set().union(*map(_names, values))
        case ast.Compare(left=left, ops=ops, comparators=others) if all(
            type(op) in {**_COMPARE, **_ORDERED} for op in ops
        ):
            return _names(left).union(*map(_names, others))
        case ast.IfExp(test=test, body=body, orelse=other):
            return _names(test) | _names(body) | _names(other)
        case ast.Call(func=ast.Name(id=name), args=args, keywords=[]) if name in FUNCTIONS and args:
            return set().union(*map(_names, args))
    raise ExpressionError(f"{ast.unparse(node)!r} is not allowed; functions: {', '.join(FUNCTIONS)}")


def _known_operator(op: ast.operator) -> bool:
    return type(op) in {**_ARITHMETIC, **_BITS} or isinstance(op, ast.LShift | ast.RShift | ast.Pow)


def _evaluate(node: ast.expr, known: Mapping[str, Value]) -> Value:
    match node:
        case ast.Constant(value=value):
            return value if isinstance(value, str) else float(value)  # type: ignore[arg-type]
        case ast.Name(id=name):
            return known[name]
        case ast.Attribute(value=ast.Name(id=name), attr=field):
            return known[f"{name}.{field}"]
        case ast.UnaryOp(op=op, operand=one):
            return _unary(op, _evaluate(one, known))
        case ast.BinOp(left=left, op=op, right=right):
            return _binary(op, _evaluate(left, known), _evaluate(right, known))
        case ast.BoolOp(op=op, values=values):
            wants = isinstance(op, ast.And)
            return float(all(_yes(one, known) for one in values) if wants else any(_yes(one, known) for one in values))
        case ast.Compare(left=left, ops=ops, comparators=others):
            return float(_compare([left, *others], ops, known))
        case ast.IfExp(test=test, body=body, orelse=other):
            return _evaluate(body if _yes(test, known) else other, known)
        case ast.Call(func=ast.Name(id=name), args=args):
            return FUNCTIONS[name](*[_evaluate(one, known) for one in args])
    raise AssertionError("checked when it was parsed")


def _yes(node: ast.expr, known: Mapping[str, Value]) -> bool:
    return bool(_evaluate(node, known))


def _unary(op: ast.unaryop, value: Value) -> float:
    if isinstance(op, ast.Not):
        return float(not value)
    if isinstance(op, ast.Invert):
        return float(~_whole(value))
    return -number(value) if isinstance(op, ast.USub) else number(value)


def _binary(op: ast.operator, left: Value, right: Value) -> float:
    if (function := _ARITHMETIC.get(type(op))) is not None:
        return function(number(left), number(right))
    if (bits := _BITS.get(type(op))) is not None:
        return float(bits(_whole(left), _whole(right)))
    if isinstance(op, ast.Pow):
        found = number(left) ** number(right)
        if isinstance(found, complex):
            raise ValueError("a root of a negative number")
        return float(found)
    places = _whole(right)
    if not 0 <= places <= 64:
        raise ValueError(f"shifted by {places}")
    return float(_whole(left) << places if isinstance(op, ast.LShift) else _whole(left) >> places)


def _compare(nodes: list[ast.expr], ops: list[ast.cmpop], known: Mapping[str, Value]) -> bool:
    values = [_evaluate(node, known) for node in nodes]
    for left, op, right in zip(values[:-1], ops, values[1:], strict=True):
        if (ordered := _ORDERED.get(type(op))) is not None:
            good = ordered(number(left), number(right))
        else:
            good = _COMPARE[type(op)](*_alike(left, right))
        if not good:
            return False
    return True


def _alike(left: Value, right: Value) -> tuple[Value, Value]:
    """A field of a reply is text: beside a number it is compared as one."""
    if isinstance(left, str) != isinstance(right, str):
        return number(left), number(right)
    return left, right
