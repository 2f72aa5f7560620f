"""One JCAMP-DX spectrum, as text, with its checks. Pure.

R. S. McDonald, P. A. Wilks, Appl. Spectrosc. 42 (1988) 151 (JCAMP-DX 4.24): labelled records, ``(X++(Y..Y))`` in AFFN
or the squeezed, difference and duplicate forms of ASDF, X checks on each line, Y checks after a line in difference
form; ``(XY..XY)`` pairs. Own code because the library at hand (``jcamp`` 1.3.2) loses the first duplicates of a line
and prints where a check fails; a test holds both against each other where that one is right.
"""

from __future__ import annotations

import re

from rigd_drivers.spectra.wire import ABSORBANCE, PERCENT, TRANSMITTANCE, Curve, curve

_SQZ = {c: i for i, c in enumerate("@ABCDEFGHI")} | {c: -i for i, c in enumerate("abcdefghi", 1)}
_DIF = {c: i for i, c in enumerate("%JKLMNOPQR")} | {c: -i for i, c in enumerate("jklmnopqr", 1)}
_DUP = {c: i for i, c in enumerate("STUVWXYZs", 1)}
_TOKEN = re.compile(r"\s*,?\s*(?:([@A-Ia-i%J-Rj-rS-Zs])(\d*(?:\.\d*)?)|([+-]?(?:\d+\.?\d*|\.\d+)))")
_AFFN = re.compile(r"[+-]?(?:\d+\.?\d*|\.\d+)(?:[Ee][+-]?\d+)?")
_HEAD = re.compile(r"\s*[+-]?(?:\d+\.?\d*|\.\d+)")
_SQUEEZED = re.compile(r"[@A-DF-Ia-df-i%J-Rj-rS-Zs]")
_X_UNITS = ("1/CM", "CM-1", "CM^-1", "CM**-1")
_Y_UNITS = {
    "ABSORBANCE": ABSORBANCE,
    "TRANSMITTANCE": TRANSMITTANCE,
    "% TRANSMITTANCE": PERCENT,
    "PERCENT TRANSMITTANCE": PERCENT,
}
_X_OFF = 0.6
"""An X check may be off by this share of the step: one lost or doubled point is off by a whole one."""


def read(text: str) -> Curve:
    """The spectrum in the text; ``ValueError`` with what is against the standard, or not infrared."""
    records = labelled(text)
    if "END" not in records:
        raise ValueError("there is no ##END=: it is not whole")
    if records.get("DATATYPE", "").upper() == "LINK":
        raise ValueError("it is a compound file; write one spectrum per file")
    x_unit, y_unit = records.get("XUNITS", "").upper(), records.get("YUNITS", "").upper()
    if x_unit not in _X_UNITS or y_unit not in _Y_UNITS:
        raise ValueError(f"its units are {x_unit or '?'} and {y_unit or '?'}; 1/CM and ABSORBANCE are wanted")
    wavenumbers, ordinates = table(records)
    return curve(wavenumbers, ordinates, _Y_UNITS[y_unit])


def labelled(text: str) -> dict[str, str]:
    """The records by label; labels compare without blanks, hyphens, slashes and underscores. Comments are dropped."""
    found: dict[str, str] = {}
    label = ""
    for line in text.splitlines():
        line = line.split("$$", 1)[0].rstrip()
        if line.startswith("##"):
            label, mark, value = line[2:].partition("=")
            if not mark:
                raise ValueError(f"{line[:40]!r} is no labelled record")
            label = re.sub(r"[\s\-/_]", "", label).upper()
            found[label] = value.strip()
        elif label and line.strip():
            found[label] += "\n" + line
    return found


def table(records: dict[str, str]) -> tuple[list[float], list[float]]:
    """Abscissas and ordinates in real units."""
    form, _, body = (records.get("XYDATA") or records.get("XYPOINTS") or "").partition("\n")
    form = form.replace(" ", "").upper().rstrip(")")
    y_factor = _number(records, "YFACTOR", 1.0)
    if form == "(XY..XY":
        pairs = [float(word) for word in _AFFN.findall(body)]
        x_factor = _number(records, "XFACTOR", 1.0)
        return [x * x_factor for x in pairs[0::2]], [y * y_factor for y in pairs[1::2]]
    if form != "(X++(Y..Y":
        raise ValueError(f"its data are {form or 'not there'}; (X++(Y..Y)) or (XY..XY) are read")
    first, last, count = (_number(records, name) for name in ("FIRSTX", "LASTX", "NPOINTS"))
    points = int(count)
    if points < 2:
        raise ValueError(f"NPOINTS is {count:g}")
    step = (last - first) / (points - 1)
    raw = _ordinates(body, first, step, _number(records, "XFACTOR", 1.0))
    if len(raw) != points:
        raise ValueError(f"NPOINTS is {points}, but {len(raw)} ordinates are there")
    ordinates = [value * y_factor for value in raw]
    told = _number(records, "FIRSTY", ordinates[0])
    if abs(told - ordinates[0]) > abs(y_factor) + 1e-4 * abs(told):
        raise ValueError(f"FIRSTY is {told:g}, but the first ordinate is {ordinates[0]:g}")
    return [first + step * i for i in range(points)], ordinates


def _ordinates(body: str, first: float, step: float, x_factor: float) -> list[float]:
    found: list[float] = []
    read_line = _asdf if _SQUEEZED.search(body) else _affn
    ends_in_difference = False
    for line in body.splitlines():
        head, values, differs = read_line(line, found[-1] if found else 0.0)
        at = len(found)
        if ends_in_difference:
            if not values or values[0] != found[-1]:
                raise ValueError(f"Y check failed before the line {line[:20]!r}")
            at, values = at - 1, values[1:]
        if abs(head * x_factor - (first + at * step)) > _X_OFF * abs(step):
            raise ValueError(f"X check failed at the line {line[:20]!r}: {first + at * step:g} is expected")
        found += values
        ends_in_difference = differs
    return found


def _affn(line: str, _: float) -> tuple[float, list[float], bool]:
    """(abscissa, ordinates, False) of a line of plain numbers; a sign may stand for a blank."""
    words = _AFFN.findall(line)
    if not words or _AFFN.sub("", line).strip(" \t,;"):
        raise ValueError(f"line {line[:20]!r} holds something that is no number")
    return float(words[0]), [float(word) for word in words[1:]], False


def _asdf(line: str, before: float) -> tuple[float, list[float], bool]:
    """(abscissa, ordinates, whether the last is a difference) of a line in squeezed form."""
    head = _HEAD.match(line)
    if head is None:
        raise ValueError(f"line {line[:20]!r} has no abscissa")
    values: list[float] = []
    difference: float | None = None
    at = head.end()
    while at < len(line.rstrip()):
        token = _TOKEN.match(line, at)
        if token is None:
            raise ValueError(f"line {line[:20]!r} has {line[at]!r}, which stands for nothing")
        at, code, digits = token.end(), token[1], token[2] or ""
        if code in _DUP:
            times = int(f"{_DUP[code]}{digits}") - 1
            if not values:
                raise ValueError(f"line {line[:20]!r} begins with a duplicate of nothing")
            for _ in range(times):
                values.append(values[-1] + (difference or 0.0))
        elif code in _DIF:
            difference = _signed(_DIF[code], code.islower(), digits)
            values.append((values[-1] if values else before) + difference)
        else:
            difference = None
            values.append(float(token[3]) if code is None else _signed(_SQZ[code], code.islower(), digits))
    return float(head[0]), values, difference is not None


def _signed(digit: int, negative: bool, digits: str) -> float:
    size = float(f"{abs(digit)}{digits}")
    return -size if negative else size


def _number(records: dict[str, str], label: str, default: float | None = None) -> float:
    text = records.get(label, "").replace(",", ".").strip()
    if not text and default is not None:
        return default
    try:
        return float(text.split()[0])
    except (IndexError, ValueError):
        raise ValueError(f"{label} is {text!r}, and no number") from None
