"""Tables of resistance thermometers and thermocouples against the functions of their standards.

The rows were computed once; here they are held against the functions written anew, so that a slip in a table or in a
coefficient shows. Coefficients: IEC 60751:2022; ITS-90 reference functions of NIST SRD 60 (from memory, confirmed by
the rows).
"""

from __future__ import annotations

import csv
import math
from pathlib import Path

import pytest

REFERENCE = Path(__file__).parents[1] / "reference"
A, B, C = 3.9083e-3, -5.775e-7, -4.183e-12
K_ABOVE = (
    -1.7600413686e-2, 3.8921204975e-2, 1.8558770032e-5, -9.9457592874e-8, 3.1840945719e-10, -5.6072844889e-13,
    5.6075059059e-16, -3.2020720003e-19, 9.7151147152e-23, -1.2104721275e-26,
)  # fmt: skip
K_BELOW = (
    0.0, 3.9450128025e-2, 2.3622373598e-5, -3.2858906784e-7, -4.9904828777e-9, -6.7509059173e-11, -5.7410327428e-13,
    -3.1088872894e-15, -1.0451609365e-17, -1.9889266878e-20, -1.6322697486e-23,
)  # fmt: skip
T_ABOVE = (
    0.0, 3.8748106364e-2, 3.3292227880e-5, 2.0618243404e-7, -2.1882256846e-9, 1.0996880928e-11, -3.0815758772e-14,
    4.5479135290e-17, -2.7512901673e-20,
)  # fmt: skip
T_BELOW = (
    0.0, 3.8748106364e-2, 4.4194434347e-5, 1.1844323105e-7, 2.0032973554e-8, 9.0138019559e-10, 2.2651156593e-11,
    3.6071154205e-13, 3.8493939883e-15, 2.8213521925e-17, 1.4251594779e-19, 4.8768662286e-22, 1.0795539270e-24,
    1.3945027062e-27, 7.9795153927e-31,
)  # fmt: skip


def rows(name: str) -> list[dict[str, str]]:
    lines = (REFERENCE / f"{name}.csv").read_text(encoding="utf-8").splitlines()
    assert lines[0].startswith("# Source: ")
    return list(csv.DictReader(lines[1:]))


def ohm(t: float) -> float:
    return 100.0 * (1.0 + A * t + B * t * t + (C * (t - 100.0) * t**3 if t < 0 else 0.0))


def polynomial(coefficients: tuple[float, ...], t: float) -> float:
    return sum(value * t**power for power, value in enumerate(coefficients))


def millivolt(kind: str, t: float) -> float:
    if kind == "T":
        return polynomial(T_ABOVE if t >= 0 else T_BELOW, t)
    if t < 0:
        return polynomial(K_BELOW, t)
    return polynomial(K_ABOVE, t) + 0.1185976 * math.exp(-1.183432e-4 * (t - 126.9686) ** 2)


@pytest.mark.parametrize("row", rows("pt100"), ids=lambda row: f"{row['T_C']} degC")
def test_resistance(row: dict[str, str]) -> None:
    t = float(row["T_C"])
    assert ohm(t) == pytest.approx(float(row["R_ohm"]), abs=6e-4)
    assert (ohm(t + 0.01) - ohm(t - 0.01)) / 0.02 == pytest.approx(float(row["dRdT"]), abs=6e-5)
    assert 0.1 + 0.0017 * abs(t) == pytest.approx(float(row["tol_AA_K"]), abs=6e-4)
    assert 0.15 + 0.002 * abs(t) == pytest.approx(float(row["tol_A_K"]), abs=6e-4)
    assert 0.3 + 0.005 * abs(t) == pytest.approx(float(row["tol_B_K"]), abs=6e-4)


@pytest.mark.parametrize("kind", ["K", "T"])
@pytest.mark.parametrize("row", rows("thermocouple"), ids=lambda row: f"{row['T_C']} degC")
def test_voltage(row: dict[str, str], kind: str) -> None:
    t = float(row["T_C"])
    assert millivolt(kind, t) == pytest.approx(float(row[f"{kind}_mV"]), abs=6e-4)
    side = 1.0 if t >= 0 else -1.0  # the functions of both sides meet at 0 degC with slopes of their own
    slope = (millivolt(kind, t + side * 0.02) - millivolt(kind, t)) / (side * 0.02) * 1000.0
    assert slope == pytest.approx(float(row[f"{kind}_uV_per_K"]), abs=0.02)
