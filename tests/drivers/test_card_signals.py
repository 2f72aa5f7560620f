"""Standard signals against the published tables, row by row; checksums against their published check values."""

from __future__ import annotations

import csv
import math
from pathlib import Path

import pytest

from rigd_drivers.card import frames, signals

REFERENCE = Path(__file__).parents[1] / "reference"


def rows(name: str) -> list[dict[str, str]]:
    return list(csv.DictReader((REFERENCE / f"{name}.csv").read_text(encoding="utf-8").splitlines()[1:]))


@pytest.mark.parametrize("row", rows("ne43"), ids=lambda row: row["mA"])
def test_ne43(row: dict[str, str]) -> None:
    current = float(row["mA"])
    assert ("bad" if signals.current_health(current) is signals.Health.FAILURE else "good") == row["quality"]
    assert signals.from_current(current, 0, 16) == pytest.approx(float(row["0-16bar"]), abs=0.005)
    assert signals.from_current(current, 0, 100) == pytest.approx(float(row["0-100C"]), abs=0.005)


def test_between_the_bands_and_no_number() -> None:
    assert signals.current_health(3.7) is signals.Health.OUT_OF_SPECIFICATION
    assert signals.current_health(math.nan) is signals.Health.FAILURE


@pytest.mark.parametrize("row", rows("pt100"), ids=lambda row: row["T_C"])
def test_pt100(row: dict[str, str]) -> None:
    assert signals.pt100_degC(float(row["R_ohm"])) == pytest.approx(float(row["T_C"]), abs=0.002)


@pytest.mark.parametrize("kind", ["K", "T"])
@pytest.mark.parametrize("row", rows("thermocouple"), ids=lambda row: row["T_C"])
def test_thermocouple(row: dict[str, str], kind: str) -> None:
    if row[f"{kind}_mV"]:
        found = signals.thermocouple_degC(kind, float(row[f"{kind}_mV"]))
        assert found == pytest.approx(float(row["T_C"]), abs=0.02)


def test_an_open_probe_is_no_temperature() -> None:
    assert math.isnan(signals.pt100_degC(1e6))
    assert math.isnan(signals.thermocouple_degC("K", 500.0))


def test_checksums() -> None:
    """Check values for "123456789" of CRC catalogues; LRC is the two's complement of the sum (0xDD)."""
    found = {name: function(b"123456789") for name, (function, _) in frames.CHECKSUMS.items()}
    assert found == {
        "sum": 0xDD, "sum16": 0x1DD, "sum-inverted": 0x22, "xor": 0x31, "lrc": 0x23, "crc8": 0xF4,
        "crc16-modbus": 0x4B37, "crc-ccitt": 0x29B1, "crc-xmodem": 0x31C3,
    }  # fmt: skip
