"""Numbers as the bench devices write and read them: decimal point, no exponent."""

from __future__ import annotations

import math
import re

_NUMBER = re.compile(r"[-+]?(?:\d{1,12}(?:\.\d{0,12})?|\.\d{1,12})")


def read_number(word: str) -> float | None:
    """The value of a number word, ``None`` for anything else (exponents, ``nan``, blanks)."""
    return float(word) if _NUMBER.fullmatch(word, 0) and word.isascii() else None


def read_count(word: str) -> int | None:
    """The value of a plain whole number without a sign, ``None`` for anything else."""
    return int(word) if word.isascii() and word.isdigit() and len(word) <= 9 else None


def fixed(value: float, decimals: int) -> str:
    """``value`` with so many decimals; a device has no word for "not a number", so that shows as zero."""
    text = f"{value if math.isfinite(value) else 0.0:.{decimals}f}"
    return text.removeprefix("-") if float(text) == 0 else text
