"""Run permission: what control must show its parent so that it goes on living.

A ticket names a scan and proves that the scan went through its stages in the right order (``STAGES``), each exactly
once, after the scan before it. The proof is a running CRC-32 over the stage names: not a secret, only something that a
loop which skips, repeats or reorders its work does not produce by accident. Both sides compute it with the code below.
"""

from __future__ import annotations

from dataclasses import dataclass
from zlib import crc32

STAGES = ("intake", "protect", "protect orders", "conduct", "conduct orders", "record")
"""What one scan does, in this order."""


def mark(proof: int, scan: int, stage: str) -> int:
    """The proof after ``stage`` of ``scan`` is done."""
    return crc32(f"{scan}:{stage}".encode(), proof)


def after_scan(proof: int, scan: int) -> int:
    """The proof after all stages of ``scan``, in order."""
    for stage in STAGES:
        proof = mark(proof, scan, stage)
    return proof


@dataclass(frozen=True, slots=True)
class Ticket:
    """``scan`` counts up by one; ``stamp_ns`` is the system's monotonic clock when the scan ended; ``proof`` as above.

    Scans between two tickets are covered by the later one's proof.
    """

    scan: int
    stamp_ns: int
    proof: int

    def line(self) -> bytes:
        """As one line for the pipe."""
        return f"T {self.scan} {self.stamp_ns} {self.proof}\n".encode()


def read_ticket(line: bytes) -> Ticket | None:
    """The ticket in a line, or ``None`` when the line is not a well-formed ticket."""
    words = line.split()
    if len(words) != 4 or words[0] != b"T" or not all(word.isdigit() for word in words[1:]):
        return None
    return Ticket(int(words[1]), int(words[2]), int(words[3]))
