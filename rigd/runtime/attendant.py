"""Does at the start what a person does: reset, sign the checklist, start. Only for a simulated rig, or in the name of
the person who signed on the command line. Also hands signals on as requests.
"""

from __future__ import annotations

import asyncio
from collections.abc import Sequence
from dataclasses import dataclass, field
from itertools import count

from rigd.logic.run_end import RunEnd
from rigd.model.events import Event, EventKind
from rigd.model.orders import Request, Verb
from rigd.ports.clock import Clock
from rigd.runtime.core_inbox import CoreInbox
from rigd.runtime.device import Device

REACH_S = 15.0
"""All devices must have answered this long after the start [wall]."""
RESET_S = 60.0
AGAIN_S = 0.3
ANSWER_S = 10.0

NOBODY = "nobody (simulated rig)"


@dataclass(slots=True)
class Attendant:
    """Asks through the inbox and hears the answers as a listener of the scan loop."""

    inbox: CoreInbox
    clock: Clock
    devices: Sequence[Device]
    _answers: dict[str, asyncio.Future[tuple[bool, str]]] = field(default_factory=dict)
    _ids: count[int] = field(default_factory=lambda: count(1))

    def hear(self, events: Sequence[Event]) -> None:
        """Listener: match answers to requests."""
        for event in events:
            if event.kind is EventKind.REQUEST:
                answer = self._answers.pop(str(event.fields.get("request_id")), None)
                if answer is not None and not answer.done():
                    accepted = event.fields.get("result") == "accepted"
                    answer.set_result((accepted, str(event.fields.get("detail") or event.text)))

    def ask(self, verb: Verb, who: str, target: str = "") -> asyncio.Future[tuple[bool, str]]:
        """Put a request in; the future gives (accepted, detail)."""
        request = Request(f"attendant-{next(self._ids)}", verb, who, self.clock.now_ns(), target)
        answer: asyncio.Future[tuple[bool, str]] = asyncio.get_running_loop().create_future()
        self._answers[request.id] = answer
        self.inbox.add_request(request)
        return answer

    async def reach_all(self) -> RunEnd | None:
        """Wait until every device is online; how the run ends if that does not happen."""
        loop = asyncio.get_running_loop()
        deadline_s = loop.time() + REACH_S
        while missing := [device for device in self.devices if not device.link.usable]:
            if loop.time() >= deadline_s:
                return RunEnd("refused", 2, f"could not start: {_reasons(missing)}")
            await asyncio.sleep(0.02)
        return None

    async def start(self, who: str) -> RunEnd | None:
        """Reset until it is granted, sign, start; how the run ends if the rig does not let itself be started."""
        loop = asyncio.get_running_loop()
        deadline_s = loop.time() + RESET_S
        while True:
            accepted, detail = await self._answered(Verb.RESET, who, "*")
            if accepted:
                break
            if loop.time() >= deadline_s:
                return RunEnd("refused", 2, f"could not start: the reset was refused: {detail}")
            await asyncio.sleep(AGAIN_S)
        await self._answered(Verb.CONFIRM, who, "*")  # nothing to sign is no reason; the start says what is missing
        accepted, detail = await self._answered(Verb.START, who, "")
        return None if accepted else RunEnd("refused", 2, f"could not start: the start was refused: {detail}")

    def all_simulated(self) -> bool:
        """True when every device said that it is simulated."""
        return all(device.identity is not None and device.identity.simulated for device in self.devices)

    async def _answered(self, verb: Verb, who: str, target: str) -> tuple[bool, str]:
        async with asyncio.timeout(ANSWER_S):
            return await self.ask(verb, who, target)


def _reasons(missing: Sequence[Device]) -> str:
    """One reason per link or device, without saying the same thing for each device of a dead port."""
    by_reason: dict[str, list[str]] = {}
    for device in missing:
        by_reason.setdefault(device.detail or str(device.link.state), []).append(device.spec.id)
    return "; ".join(f"{', '.join(names)}: {reason}" for reason, names in by_reason.items())
