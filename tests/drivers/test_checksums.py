"""Checksums against tests/reference/modbus_crc.csv (Modbus over Serial Line V1.02; see the header there)."""

from __future__ import annotations

import csv
from pathlib import Path

import pytest
from fakes import transcripts
from hypothesis import given
from hypothesis import strategies as st

from rigd_drivers.checksums import crc16

TABLE = Path(__file__).parents[1] / "reference" / "modbus_crc.csv"


def rows() -> list[dict[str, str]]:
    lines = [line for line in TABLE.read_text("ascii").splitlines() if not line.startswith("#")]
    return list(csv.DictReader(lines))


@pytest.mark.parametrize("row", rows(), ids=lambda row: row["bytes_hex"])
def test_published_values(row: dict[str, str]) -> None:
    data, wire = bytes.fromhex(row["bytes_hex"]), bytes.fromhex(row["on_wire"])
    assert crc16(data) == int(row["crc_hex"], 16)
    assert transcripts.crc16(data) == int(row["crc_hex"], 16)
    assert crc16(data + wire) == 0


@given(st.binary(max_size=200))
def test_table_and_bit_by_bit_agree(data: bytes) -> None:
    assert crc16(data) == transcripts.crc16(data)


@given(st.binary(min_size=1, max_size=60), st.data())
def test_one_wrong_bit_is_always_seen(data: bytes, draw: st.DataObject) -> None:
    bit = draw.draw(st.integers(0, 8 * len(data) - 1))
    bent = bytearray(data)
    bent[bit // 8] ^= 1 << bit % 8
    assert crc16(bytes(bent)) != crc16(data)
