"""Checksums of serial protocols. Pure."""

from __future__ import annotations


def _table() -> tuple[int, ...]:
    rows = []
    for byte in range(256):
        row = byte
        for _ in range(8):
            row = (row >> 1) ^ 0xA001 if row & 1 else row >> 1
        rows.append(row)
    return tuple(rows)


_CRC16 = _table()


def crc16(data: bytes) -> int:
    """CRC-16 with the reflected polynomial 0xA001 and start 0xFFFF, as of Modbus over Serial Line V1.02, 2.5.1.2.

    >>> f"{crc16(b'123456789'):04X}"
    '4B37'
    """
    crc = 0xFFFF
    for byte in data:
        crc = (crc >> 8) ^ _CRC16[(crc ^ byte) & 0xFF]
    return crc
