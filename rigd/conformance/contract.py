"""The battery that every driver must pass, ours or a stranger's (contract version 1, ``rigd.ports.driver``).

Make a ``DriverCase`` (a family, a device description, and a maker of peers: devices in memory that answer by their
manual) and derive a test class:

    class TestMyPump(DriverContract):
        case = DriverCase(family=FAMILY, spec=DeviceSpec(...), peer=MyPeer, ...)

Nothing here knows a protocol: it bends, delays, splits and repeats bytes, and holds what the driver says against what
it says on a good line. All in memory, with a clock that jumps over waits (virtual time).
"""

from __future__ import annotations

import asyncio
import contextlib
import math
import re
from collections.abc import Iterator
from dataclasses import replace
from random import Random

import jsonschema
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from rigd.conformance.bench import TIMEOUT_S, Bench, DriverCase, bench, bent, order, run, virtually
from rigd.conformance.manners import Manners
from rigd.model.devices import LinkSpec
from rigd.model.errors import (
    ConfigError,
    DeviceRefused,
    LinkClosed,
    LinkError,
    LinkTimeout,
    LocalProtocolError,
    ProtocolError,
)
from rigd.model.orders import Action
from rigd.ports.driver import CONTRACT

LINK = LinkSpec("bench", "memory", reply_timeout_s=TIMEOUT_S)
ALLOWED = (LinkError, ProtocolError, DeviceRefused)
SHARED = [HealthCheck.differing_executors, HealthCheck.too_slow]
"""One test body serves every family; examples are made afresh in each run, nothing is replayed from a store."""


class DriverContract(Manners):
    """Derive from it and set ``case``."""

    case: DriverCase

    # --- what a family is

    def test_the_family_keeps_the_contract(self) -> None:
        family = self.case.family
        assert family.contract == CONTRACT
        assert family.dialects
        assert family.title
        assert set(self.case.orders) == set(family.actions), "the case must have an example for every action"
        assert set(self.case.read) <= set(family.channels)

    def test_a_misspelt_option_is_refused_with_its_name(self) -> None:
        spec = replace(self.case.spec, options={**self.case.spec.options, "silense": "1 s", "zzz": 1})
        with pytest.raises(ConfigError) as refused:
            self.case.family.make(spec)
        text = str(refused.value)
        assert len(refused.value.problems) == 2
        assert "silense" in text
        assert "zzz" in text
        assert all(problem.key and problem.remedy for problem in refused.value.problems)

    def test_an_unknown_dialect_is_refused(self) -> None:
        with pytest.raises(ConfigError, match="dialect"):
            self.case.family.make(replace(self.case.spec, dialect="morse"))

    def test_the_schema_accepts_the_options_and_refuses_others(self) -> None:
        for dialect in self.case.family.dialects:
            schema = self.case.family.options_schema(dialect)
            jsonschema.Draft202012Validator.check_schema(schema)
            jsonschema.validate(dict(self.case.spec.options), schema)
            with pytest.raises(jsonschema.ValidationError):
                jsonschema.validate({"silense": "1 s"}, schema)

    # --- on a good line

    @virtually
    async def test_identify_says_who(self) -> None:
        async with bench(self.case) as one:
            who = await one.driver.identify(one.line)
            assert who.maker
            assert who.model
            assert who.serial_no
            assert await one.driver.identify(one.line) == who

    @virtually
    async def test_every_channel_asked_for_is_answered_in_order(self, ready: Bench) -> None:
        readings = await ready.driver.poll(ready.line, self.case.read)
        assert [reading.channel for reading in readings] == list(self.case.read)
        assert all(math.isfinite(reading.value) or reading.fault for reading in readings)
        one = self.case.read[0]
        assert [reading.channel for reading in await ready.driver.poll(ready.line, [one])] == [one]

    @virtually
    async def test_a_poll_moves_nothing_and_sees_changes(self, ready: Bench) -> None:
        before = await ready.values(self.case)
        assert await ready.values(self.case) == before
        self.case.moved(ready.peer)
        assert await ready.values(self.case) != before

    @virtually
    async def test_every_action_is_carried_out(self, ready: Bench) -> None:
        for action, value in self.case.orders.items():
            already = len(ready.peer.carried_out)
            await ready.driver.execute(ready.line, order(action, value))
            assert len(ready.peer.carried_out) > already

    @virtually
    async def test_what_it_cannot_do_it_says_before_sending(self, ready: Bench) -> None:
        already = len(ready.requests)
        for action in set(Action) - set(self.case.family.actions):
            with pytest.raises(LocalProtocolError):
                await ready.driver.execute(ready.line, order(action, 1.0))
        for action in set(self.case.orders) - set(self.case.stop) - {Action.SWAP}:
            with pytest.raises(LocalProtocolError):
                await ready.driver.execute(ready.line, order(action, math.nan))
        with pytest.raises(LocalProtocolError):
            await ready.driver.poll(ready.line, ["no such channel"])
        assert len(ready.requests) == already

    # --- stop and last will

    @virtually
    async def test_stop_may_be_said_again_and_again(self, ready: Bench) -> None:
        for _ in range(3):
            for action in self.case.stop:
                await ready.driver.execute(ready.line, order(action, self.case.orders[action]))

    @virtually
    async def test_the_last_will_is_what_a_stop_says(self, ready: Bench) -> None:
        will = ready.driver.last_will(LINK)
        assert will == ready.driver.last_will(LINK) == self.case.family.make(self.case.spec).last_will(LINK)
        already = len(ready.requests)
        for action in self.case.stop:
            await ready.driver.execute(ready.line, order(action, self.case.orders[action]))
        said = [self.case.meaning(request) for request in ready.requests[already:]]
        assert [self.case.meaning(frame.request) for frame in will.frames] == said[: len(will.frames)]
        assert bool(will.frames) == bool(self.case.stop)

    @virtually
    async def test_the_last_will_knows_a_good_answer_from_a_bad_one(self) -> None:
        will = self.case.family.make(self.case.spec).last_will(LINK)
        peer = self.case.peer()
        for frame in (*will.frames, *will.check):
            answer = peer.feed(frame.request)
            assert re.search(frame.good_reply, answer), answer
            assert not re.search(frame.good_reply, answer[:-6])
        self.case.moved(peer)
        assert not will.frames or not all(re.search(f.good_reply, peer.feed(f.request)) for f in will.check)

    @virtually
    async def test_a_driver_that_ran_before_does_not_silence_the_last_will(self, ready: Bench) -> None:
        will = ready.driver.last_will(LINK)
        for _ in range(300):
            await ready.driver.poll(ready.line, self.case.read)
            if will.frames:
                already = len(ready.peer.carried_out)
                ready.peer.feed(will.frames[0].request)
                assert len(ready.peer.carried_out) == already + 1

    # --- on a bad line

    @virtually
    async def test_silence_is_a_timeout_within_the_deadline(self, ready: Bench) -> None:
        ready.deaf = True
        tries = 1 + int(str(self.case.spec.facts.get("retries", 0)))
        started = asyncio.get_running_loop().time()
        with pytest.raises(LinkTimeout, match=self.case.spec.id):
            await ready.driver.poll(ready.line, self.case.read)
        took = asyncio.get_running_loop().time() - started
        assert tries * TIMEOUT_S <= took < 3 * tries * TIMEOUT_S + 0.2
        ready.deaf = False
        assert await ready.values(self.case)

    @virtually
    async def test_a_vanished_port_is_said_at_once(self, ready: Bench) -> None:
        await ready.far.close()
        with pytest.raises(LinkClosed):
            await ready.driver.poll(ready.line, self.case.read)

    @given(seed=st.integers(0, 10**9))
    @settings(max_examples=200, suppress_health_check=SHARED)
    def test_bent_bytes_never_become_a_wrong_value(self, seed: int) -> None:
        async def work() -> None:
            chance = Random(seed)
            on = False

            def hook(data: bytes) -> list[tuple[float, bytes]]:
                return bent(chance.randrange(10**9), data, self.case) if on and chance.random() < 0.7 else [(0, data)]

            async with bench(self.case, hook) as one:
                await one.ready()
                before = await one.values(self.case)
                on = True
                with contextlib.suppress(*ALLOWED):
                    assert await one.values(self.case) == before
                self.case.moved(one.peer)
                on = False
                await asyncio.sleep(2.5 * TIMEOUT_S)
                async with bench(self.case) as other:
                    await other.ready()
                    self.case.moved(other.peer)
                    assert await one.values(self.case) == await other.values(self.case)

        run(work())

    @given(cuts=st.lists(st.integers(1, 60), max_size=12))
    @settings(max_examples=60, suppress_health_check=SHARED)
    def test_any_split_of_the_bytes_gives_the_same_replies(self, cuts: list[int]) -> None:
        async def work() -> None:
            def hook(data: bytes) -> Iterator[tuple[float, bytes]]:
                start = 0
                for turn, cut in enumerate([*cuts, len(data)]):
                    yield turn * 1e-5, data[start : start + cut]
                    start += cut

            async with bench(self.case, hook) as one, bench(self.case) as other:
                assert await one.driver.identify(one.line) == await other.driver.identify(other.line)
                await one.driver.prepare(one.line)
                await other.driver.prepare(other.line)
                assert await one.values(self.case) == await other.values(self.case)

        run(work())

    @virtually
    async def test_a_late_reply_is_never_taken_for_the_next_one(self) -> None:
        held: list[bytes] = []
        holding = False

        def hook(data: bytes) -> list[tuple[float, bytes]]:
            if holding:
                held.append(data)
                return []
            late, held[:] = list(held), []
            return [(0, piece) for piece in (*late, data)]  # all the late ones just before the new one

        async with bench(self.case, hook) as one:
            await one.ready()
            before = await one.values(self.case)
            holding = True
            with pytest.raises(LinkTimeout):
                await one.driver.poll(one.line, self.case.read)
            self.case.moved(one.peer)
            holding = False
            if self.case.checked:
                assert await one.values(self.case) != before
            else:  # nothing in the reply tells; the line waits out what may be late, if it comes within its time
                for piece in held:
                    await one.far.write(piece)
                held.clear()
                assert await one.values(self.case) != before

    @virtually
    async def test_a_cancelled_call_leaves_the_line_usable(self, ready: Bench) -> None:
        expected = await ready.values(self.case)
        for steps in range(12):
            call = asyncio.create_task(ready.driver.poll(ready.line, self.case.read))
            for _ in range(steps):
                await asyncio.sleep(0)
            call.cancel()
            with contextlib.suppress(asyncio.CancelledError):
                await call
            assert await ready.values(self.case) == expected

    @virtually
    async def test_an_order_whose_reply_was_lost_does_nothing_twice(self) -> None:
        """With numbers it is carried out once; without, only what states a target is said again, in the same words."""
        lose = 0

        def hook(data: bytes) -> list[tuple[float, bytes]]:
            nonlocal lose
            lose -= 1
            return [] if lose >= 0 else [(0, data)]

        async with bench(self.case, hook) as one:
            await one.ready()
            for action, value in self.case.orders.items():
                already = len(one.peer.carried_out)
                await one.driver.execute(one.line, order(action, value))
                usual = one.peer.carried_out[already:]
                lose = 1
                await one.driver.execute(one.line, order(action, value))
                again = one.peer.carried_out[already + len(usual) :]
                assert again == (usual if self.case.checked else [usual[0], *usual])
