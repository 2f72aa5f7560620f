"""What waits for the next scan. Filled by the device tasks and the door, emptied whole by the scan loop."""

from __future__ import annotations

import asyncio
from collections.abc import Iterable

from rigd.model.devices import DeviceStatus
from rigd.model.intake import Intake
from rigd.model.orders import Action, Order, Outcome, Request, Result
from rigd.model.samples import Sample


class CoreInbox:
    """Keeps the order of arrival per kind. A sample of a tag in ``prompt_tags``, a link change or a request makes the
    next scan start at once; everything else waits for it, at most one scan period.
    """

    def __init__(self, prompt_tags: frozenset[str]) -> None:
        self._prompt_tags = prompt_tags
        self._samples: list[Sample] = []
        self._outcomes: list[Outcome] = []
        self._links: list[DeviceStatus] = []
        self._requests: list[Request] = []
        self.prompt = asyncio.Event()

    def add_samples(self, samples: Iterable[Sample]) -> None:
        """New samples."""
        for sample in samples:
            self._samples.append(sample)
            if sample.tag in self._prompt_tags:
                self.prompt.set()

    def add_outcome(self, order: Order, result: Result, t_ns: int, detail: str = "") -> None:
        """What became of an order; a stop that is done or not done is told at once."""
        self._outcomes.append(Outcome(order.number, order.unit, order.action, result, t_ns, detail))
        if order.action is Action.STOP:
            self.prompt.set()

    def add_link(self, status: DeviceStatus) -> None:
        """A device changed its state."""
        self._links.append(status)
        self.prompt.set()

    def add_request(self, request: Request) -> None:
        """Somebody asks for something."""
        self._requests.append(request)
        self.prompt.set()

    def take(self, faults: tuple[tuple[str, str], ...]) -> Intake:
        """Everything that waits, with the shell's own faults; empties the inbox."""
        intake = Intake(tuple(self._samples), tuple(self._outcomes), tuple(self._links), tuple(self._requests), faults)
        for waiting in (self._samples, self._outcomes, self._links, self._requests):
            waiting.clear()
        self.prompt.clear()
        return intake
