"""On-delay and off-delay as one value object, advanced by ``now_ns``."""

from __future__ import annotations

from dataclasses import dataclass

NEVER_NS = 1 << 62
"""Later than every run; the due time of something that is not waiting."""


@dataclass(frozen=True, slots=True)
class Delay:
    """An output that follows its input once the input has kept its new value for the delay.

    ``since_ns`` is when the input began to differ from the output, ``NEVER_NS`` while they agree. An input that
    flickers starts the delay anew.
    """

    output: bool = False
    since_ns: int = NEVER_NS

    def due_ns(self, on_ns: int, off_ns: int) -> int:
        """When the output will change if the input stays as it is."""
        if self.since_ns == NEVER_NS:
            return NEVER_NS
        return self.since_ns + (off_ns if self.output else on_ns)

    def advance(self, wanted: bool, now_ns: int, on_ns: int, off_ns: int) -> Delay:
        """The delay after seeing input ``wanted`` at ``now_ns``; returns itself when nothing changed."""
        if wanted == self.output:
            return self if self.since_ns == NEVER_NS else Delay(self.output)
        waiting = self if self.since_ns != NEVER_NS else Delay(self.output, now_ns)
        if now_ns >= waiting.due_ns(on_ns, off_ns):
            return Delay(wanted)
        return waiting


QUIET = Delay()
"""Output off and not waiting."""
