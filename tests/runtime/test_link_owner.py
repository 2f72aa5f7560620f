"""The owner of a link in virtual time: reads, orders, trips that overtake, devices that fail, cables that are
pulled."""

from __future__ import annotations

import asyncio
import itertools
from collections.abc import AsyncIterator, Callable, Coroutine
from contextlib import asynccontextmanager, suppress
from typing import Any

import pytest
from fakes.word_device import WordDevice, WordDriver, serve, spec

from rigd.adapters.memory_link import MemoryLink, memory_pair
from rigd.model.devices import DeviceSpec, LinkSpec, LinkState
from rigd.model.errors import LinkClosed
from rigd.model.intake import Intake
from rigd.model.orders import Action, Authority, Order, Result
from rigd.ports.link import Link
from rigd.runtime.core_inbox import CoreInbox
from rigd.runtime.device import RECOGNISE_NS, Device
from rigd.runtime.link_owner import LinkOwner
from rigd.runtime.polls import Poll
from rigd.runtime.virtual_time import LoopClock, VirtualLoop

LINK = LinkSpec("bus", "memory", reply_timeout_s=0.3)


def polls(one: DeviceSpec) -> list[Poll]:
    (channel,) = one.channels
    return [Poll(one.id, (channel.channel,), {channel.channel: channel.tag}, channel.period_ns)]


class Bench:
    """One bus with word devices, its owner, and what the core would get."""

    def __init__(self, *devices: WordDevice, serial_no: str = "") -> None:
        self.far = devices
        self.plugged = True
        self.core = CoreInbox(frozenset())
        self.clock = LoopClock()
        specs = [spec(device.name, serial_no=serial_no) for device in devices]
        self.devices = [Device(one, WordDriver(one), polls(one), self.core, self.clock) for one in specs]
        self.owner = LinkOwner(LINK, self.devices, self.open, self.core, self.clock, self.clock.now_ns)
        self.near: MemoryLink | None = None
        self.group: asyncio.TaskGroup
        self.opened = 0

    async def open(self, _: LinkSpec) -> Link:
        if not self.plugged:
            raise LinkClosed("the port does not exist")
        self.opened += 1
        self.near, far = memory_pair()
        self.group.create_task(self._serve(far))
        return self.near

    async def _serve(self, far: MemoryLink) -> None:
        with suppress(LinkClosed):
            await serve(far, self.far)

    @asynccontextmanager
    async def running(self) -> AsyncIterator[None]:
        async with asyncio.TaskGroup() as self.group:
            task = self.group.create_task(self.owner.run())
            yield
            task.cancel()
            if self.near is not None:
                await self.near.close()

    async def after(self, seconds: float) -> Intake:
        await asyncio.sleep(seconds)
        return self.core.take(())

    def order(self, number: int, unit: str, action: Action, value: float = 1.0, authority: int = 2) -> None:
        self.owner.post(Order(number, unit, action, value, Authority(authority), "test", self.clock.now_ns()))


def virtually(test: Callable[[], Coroutine[Any, Any, None]]) -> Callable[[], None]:
    """Run an async test on the virtual loop."""

    def run() -> None:
        with asyncio.Runner(loop_factory=VirtualLoop) as runner:
            runner.run(test())

    run.__name__ = test.__name__
    return run


@virtually
async def test_devices_come_up_and_are_read_at_their_period() -> None:
    bench = Bench(WordDevice("a"), WordDevice("b"))
    async with bench.running():
        intake = await bench.after(2.05)
        states = [(status.device, status.link) for status in intake.links]
        assert states == [(n, s) for n in "ab" for s in (LinkState.OPENING, LinkState.ONLINE)]
        assert intake.links[1].identity is not None
        times = [sample.t_ns for sample in intake.samples if sample.tag == "a.x"]
        steps = {round((b - a) / 1e6) for a, b in itertools.pairwise(times)}
        assert len(times) == 11
        assert max(steps) - min(steps) <= 20  # at most one exchange of the other device late


@virtually
async def test_every_order_gets_its_outcome() -> None:
    bench = Bench(WordDevice("a"), WordDevice("b"))
    async with bench.running():
        await bench.after(1)
        bench.order(1, "U-a", Action.DELIVER, 0.5)
        bench.far[1].refusing = True
        bench.order(2, "U-b", Action.MOVE)
        intake = await bench.after(1)
        assert [(o.order_number, o.result) for o in intake.outcomes] == [(1, Result.DONE), (2, Result.REFUSED)]
        assert bench.far[0].done == [("deliver", 0.5)]


@virtually
async def test_a_stop_overtakes_reads_orders_and_the_search_for_a_lost_device() -> None:
    bench = Bench(WordDevice("a"), WordDevice("dead"))
    bench.far[1].silent = True
    async with bench.running():
        await bench.after(3)
        for number in range(1, 20):
            bench.order(number, "U-a", [Action.DELIVER, Action.FILL, Action.MOVE][number % 3])
        bench.order(99, "U-a", Action.STOP, authority=5)
        began_ns = bench.clock.now_ns()
        intake = await bench.after(1)
        stop = next(o for o in intake.outcomes if o.order_number == 99)
        assert stop.result is Result.DONE
        assert stop.t_ns - began_ns < 0.35e9  # one exchange in flight (0.3 s) and its own
        assert bench.far[0].done == [("stop", 1.0)]
        assert sorted(o.order_number for o in intake.outcomes) == [*range(1, 20), 99]


@virtually
async def test_a_silent_device_degrades_fails_and_comes_back_and_its_neighbour_goes_on() -> None:
    bench = Bench(WordDevice("a"), WordDevice("b"))
    async with bench.running():
        await bench.after(1)
        bench.far[1].silent = True
        intake = await bench.after(5)
        assert [s.link for s in intake.links if s.device == "b"][:2] == [LinkState.DEGRADED, LinkState.FAILED]
        assert sum(sample.tag == "a.x" for sample in intake.samples) >= 12
        bench.order(1, "U-b", Action.DELIVER)
        bench.order(2, "U-b", Action.STOP)
        outcomes = (await bench.after(1)).outcomes
        assert {o.order_number: o.result for o in outcomes} == {1: Result.SUPERSEDED, 2: Result.FAILED}
        assert bench.far[1].silent
        bench.order(3, "U-b", Action.DELIVER)
        (outcome,) = (await bench.after(1)).outcomes
        assert (outcome.result, "b is" in outcome.detail) == (Result.FAILED, True)
        bench.far[1].silent = False
        bench.far[1].restarted = True
        back = [s for s in (await bench.after(6)).links if s.device == "b" and s.link is LinkState.ONLINE]
        assert [s.power_cycled for s in back] == [True]


@virtually
async def test_a_pulled_cable_is_told_for_all_devices_and_mended_when_it_is_back() -> None:
    bench = Bench(WordDevice("a"), WordDevice("b"))
    async with bench.running():
        await bench.after(1)
        bench.plugged = False
        assert bench.near is not None
        await bench.near.close()
        intake = await bench.after(3)
        failed = [status for status in intake.links if status.link is LinkState.FAILED]
        assert sorted(status.device for status in failed) == ["a", "b"]
        bench.order(1, "U-a", Action.STOP)
        (outcome,) = (await bench.after(0.1)).outcomes
        assert outcome.result is Result.FAILED
        bench.plugged = True
        intake = await bench.after(6)
        assert sorted(s.device for s in intake.links if s.link is LinkState.ONLINE) == ["a", "b"]
        assert bench.opened == 2


@virtually
async def test_another_device_than_the_rig_file_names_is_not_used() -> None:
    bench = Bench(WordDevice("a", serial_no="7"), serial_no="8")
    async with bench.running():
        intake = await bench.after(1)
        assert "serial number '7'" in intake.links[-1].detail
        assert intake.links[-1].link is LinkState.FAILED
        assert not intake.samples
        bench.order(1, "U-a", Action.DELIVER)
        assert (await bench.after(0.5)).outcomes[0].result is Result.FAILED
        assert not bench.far[0].done


@virtually
async def test_a_device_swapped_in_mid_run_is_noticed_without_a_serial_number_in_the_file() -> None:
    bench = Bench(WordDevice("a", serial_no="7"))
    async with bench.running():
        await bench.after(1)
        bench.far[0].silent = True
        await bench.after(2)
        bench.far[0].silent, bench.far[0].serial_no = False, "9"
        links = (await bench.after(6)).links
        assert all(status.link is not LinkState.ONLINE for status in links)
        assert "'9'" in links[-1].detail


@virtually
async def test_a_late_reply_is_not_taken_for_the_next_one() -> None:
    bench = Bench(WordDevice("a"))
    async with bench.running():
        await bench.after(1)
        bench.far[0].value, bench.far[0].delay_s = 111.0, 0.4  # later than the deadline of 0.3 s
        await bench.after(0.45)
        bench.far[0].value, bench.far[0].delay_s = 2.0, 0.01
        bench.core.take(())
        late = await bench.after(10)
        values = [sample.value for sample in late.samples]
        assert values
        assert 111.0 not in values


@pytest.mark.parametrize("seed", range(3))
def test_nothing_is_left_waiting_whatever_is_posted(seed: int) -> None:
    import random

    chance = random.Random(seed)

    async def storm() -> None:
        bench = Bench(WordDevice("a"), WordDevice("b"))
        async with bench.running():
            told: list[int] = []
            for number in range(200):
                for device in bench.far:
                    device.silent = chance.random() < 0.1
                unit = f"U-{chance.choice('ab')}"
                bench.order(number, unit, chance.choice(list(Action)), authority=chance.choice([2, 4, 5]))
                told += [o.order_number for o in (await bench.after(chance.random() * 0.2)).outcomes]
            for device in bench.far:
                device.silent = False
            told += [o.order_number for o in (await bench.after(30)).outcomes]
            assert sorted(told) == list(range(200))

    virtually(storm)()


@virtually
async def test_a_device_exchanged_between_two_polls_is_noticed_within_the_time_of_asking_again() -> None:
    """It answers every poll, so no silence tells."""
    bench = Bench(WordDevice("a", serial_no="7"), WordDevice("b", serial_no="1"))
    async with bench.running():
        calm = await bench.after(25)
        assert [status.link for status in calm.links if status.device == "a"] == [LinkState.OPENING, LinkState.ONLINE]
        assert bench.far[0].heard.count("who") == 3
        bench.far[0].serial_no = "9"
        intake = await bench.after(RECOGNISE_NS / 1e9 + 0.5)
        lost = next(status for status in intake.links if status.link is LinkState.FAILED)
        assert lost.device == "a"
        assert "serial number '9'" in lost.detail
        assert lost.identity is not None
        assert lost.identity.serial_no == "7"
        bench.far[0].serial_no = "7"
        assert (await bench.after(10)).links[-1].link is LinkState.ONLINE
