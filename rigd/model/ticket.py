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
SCANS_PER_TICKET_MAX = 100_000
CLOCK_SKEW_NS = 100_000_000


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


class Window:
    """Judges tickets: ``first_s`` to the first one, then between ``early_s`` and ``late_s`` from one to the next."""

    def __init__(self, first_s: float, early_s: float, late_s: float, now_ns: int) -> None:
        self._early_ns, self._late_ns = int(early_s * 1e9), int(late_s * 1e9)
        self._last = Ticket(0, 0, 0)
        self.deadline_ns = now_ns + int(first_s * 1e9)

    def judge(self, ticket: Ticket, now_ns: int) -> str:
        """ "" for a good ticket, else what is wrong with it."""
        last, self._last = self._last, ticket
        if not 0 < ticket.scan - last.scan <= SCANS_PER_TICKET_MAX:
            return f"its ticket for scan {ticket.scan} does not follow scan {last.scan}"
        proof = last.proof
        for scan in range(last.scan + 1, ticket.scan + 1):
            proof = after_scan(proof, scan)
        if proof != ticket.proof:
            return f"its ticket for scan {ticket.scan} does not prove the order of its work"
        if ticket.stamp_ns > now_ns + CLOCK_SKEW_NS:
            return "its ticket comes from the future"
        if last.scan and ticket.stamp_ns - last.stamp_ns < self._early_ns:
            return f"its ticket came {(ticket.stamp_ns - last.stamp_ns) / 1e6:.0f} ms after the one before, too early"
        self.deadline_ns = ticket.stamp_ns + self._late_ns
        return ""
