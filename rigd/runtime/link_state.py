"""The states of the way to one device, as a declared machine (``transitions``, synchronous; decision 4).

    closed -> opening -> online <-> degraded -> failed -> opening ...

``miss`` counts: the first unanswered call degrades, ``MISSES_TO_FAIL`` in a row fail. A port that vanishes fails at
once.
"""

from __future__ import annotations

from types import SimpleNamespace
from typing import Any

from transitions import Machine

from rigd.model.devices import LinkState

MISSES_TO_FAIL = 2

_TRANSITIONS: list[Any] = [
    # trigger, from, to
    ["bring_up", LinkState.CLOSED, LinkState.OPENING],
    ["bring_up", LinkState.FAILED, LinkState.OPENING],
    ["bring_up", LinkState.OPENING, None],
    ["arrive", LinkState.OPENING, LinkState.ONLINE],
    ["answer", LinkState.DEGRADED, LinkState.ONLINE],
    ["degrade", LinkState.ONLINE, LinkState.DEGRADED],
    ["lose", [LinkState.CLOSED, LinkState.OPENING, LinkState.ONLINE, LinkState.DEGRADED], LinkState.FAILED],
    ["lose", LinkState.FAILED, None],
]


class LinkStatus:
    """State and count of misses of one device. Each method returns True when the state changed."""

    def __init__(self) -> None:
        self.misses = 0
        self._model: Any = SimpleNamespace()  # the machine adds ``state`` and ``trigger``
        Machine(
            self._model,
            states=list(LinkState),
            initial=LinkState.CLOSED,
            transitions=_TRANSITIONS,
            auto_transitions=False,
        )

    @property
    def state(self) -> LinkState:
        """The state now."""
        state: LinkState = self._model.state
        return state

    @property
    def usable(self) -> bool:
        """True while calls to the device make sense."""
        return self.state in (LinkState.ONLINE, LinkState.DEGRADED)

    def bring_up(self) -> bool:
        """An attempt to reach the device begins."""
        return self._go("bring_up")

    def arrive(self) -> bool:
        """The device was identified and prepared."""
        self.misses = 0
        return self._go("arrive")

    def answer(self) -> bool:
        """A call was answered."""
        self.misses = 0
        return self.state is LinkState.DEGRADED and self._go("answer")

    def miss(self) -> bool:
        """A call was not answered, or with nonsense."""
        self.misses += 1
        if self.misses >= MISSES_TO_FAIL:
            return self.lose()
        return self.state is LinkState.ONLINE and self._go("degrade")

    def lose(self) -> bool:
        """The device is not there (any more)."""
        return self._go("lose")

    def _go(self, trigger: str) -> bool:
        before = self.state
        self._model.trigger(trigger)
        return self.state is not before
