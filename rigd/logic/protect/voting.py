"""k-out-of-n voting with bad channels; ideas of IEC 61511-1:2016 cl. 11.3 and 11.4, policy names our own.

Policy T (``OnBad.TRIP``): a bad channel is a vote to trip. Policy N (``OnBad.IGNORE``): a bad channel is left out; when
too few healthy ones are left to trip, nothing protects any more, and the interlock must trip for that reason alone.
Held row by row against tests/reference/voting.csv.
"""

from __future__ import annotations

from dataclasses import dataclass

from rigd.model.protection import OnBad


@dataclass(frozen=True, slots=True)
class Rule:
    """Healthy channels that must demand (0: trip always; ``None``: no number is enough), and the voting left over."""

    need: int | None
    equivalent: str

    def demands(self, votes: int) -> bool:
        """True when this many healthy channels that demand a trip are enough."""
        return self.need is not None and votes >= self.need


def rule(votes: int, channels: int, bad: int, on_bad: OnBad) -> Rule:
    """The voting left of ``votes`` out of ``channels`` when ``bad`` of them cannot be believed."""
    assert 1 <= votes <= channels
    assert 0 <= bad <= channels
    healthy = channels - bad
    if on_bad is OnBad.TRIP:
        need = max(0, votes - bad)
        return Rule(need, f"{need}oo{healthy}" if need else "tripped")
    if healthy < votes:
        return Rule(None, "NO PROTECTION (forbidden)")
    return Rule(votes, f"{votes}oo{healthy}")
