"""The live shell with the real core, real drivers and byte-level emulators, in virtual time: starts, stops, faults."""

from __future__ import annotations

import asyncio
from collections.abc import Callable, Coroutine
from pathlib import Path
from typing import Any

import pytest
from fakes.deep_rig import DeepRig, run_virtually

from rigd.adapters.journal_reader import JournalReader
from rigd.adapters.journal_sqlite import SqliteJournal
from rigd.adapters.plugins import driver_family
from rigd.config import load_pair
from rigd.logic import scan as core
from rigd.logic.run_end import RunEnd
from rigd.model.devices import LinkState
from rigd.model.errors import LinkTimeout
from rigd.model.events import EventKind
from rigd.model.orders import Action
from rigd.runtime.attendant import Attendant

CONFIGS = Path(__file__).parents[2] / "configs"
PAIR = load_pair(CONFIGS / "rigs" / "two-pump-column.toml", CONFIGS / "recipes" / "demo-sweep.toml")
assert PAIR.recipe is not None

Script = Callable[[DeepRig], Coroutine[Any, Any, None]]


def play(script: Script, **more: Any) -> tuple[DeepRig, RunEnd]:
    """Run the shell beside a script; returns both when the run has ended."""

    async def main() -> tuple[DeepRig, RunEnd]:
        assert PAIR.recipe is not None
        rig = DeepRig(PAIR.rig, PAIR.recipe, **more)
        async with asyncio.TaskGroup() as group:
            running = group.create_task(rig.run())
            group.create_task(script(rig))
        return rig, running.result()

    return run_virtually(main())


async def started(rig: DeepRig) -> None:
    """Wait until the pumps deliver."""
    await rig.until(lambda: any(order.action is Action.DELIVER for order in rig.journal.orders))
    await asyncio.sleep(5)


def flows(rig: DeepRig) -> float:
    """What really flows out of the pumps [mL/min]."""
    truth = rig.plant.truth()
    return sum(abs(truth[f"flow:{line}"]) for line in ("L-A3", "L-B3"))


def test_two_signals_cut_and_one_line_tells_the_end() -> None:
    async def script(rig: DeepRig) -> None:
        await started(rig)
        assert flows(rig) > 0.1
        rig.live.signalled()
        await asyncio.sleep(5)
        rig.live.signalled()

    rig, end = play(script)
    assert (end.outcome, end.exit_code) == ("stopped", 1) or (end.outcome, end.exit_code) == ("tripped", 1)
    assert flows(rig) == pytest.approx(0, abs=0.02)  # the line relaxes
    assert rig.live.orderly


def test_a_third_signal_ends_control_without_its_last_word() -> None:
    async def script(rig: DeepRig) -> None:
        await started(rig)
        await rig.pull("bus-1")
        for _ in range(3):
            rig.live.signalled()
            await asyncio.sleep(0.2)

    rig, end = play(script)
    assert end.exit_code == 1
    assert not rig.live.orderly


def test_a_device_that_is_not_there_ends_the_start_with_its_reason() -> None:
    async def script(rig: DeepRig) -> None:
        rig.pulled.add("chiller-port")

    _, end = play(script)
    assert end.exit_code == 2
    assert "chiller: port simulated does not exist" in end.text


def test_a_guard_that_is_gone_means_a_cut_and_an_end() -> None:
    async def script(rig: DeepRig) -> None:
        await started(rig)
        rig.live._guard_lost()
        await asyncio.sleep(3)
        assert flows(rig) == pytest.approx(0, abs=0.02)  # the line relaxes

    rig, end = play(script)
    assert end.exit_code == 1
    assert "trip: FAULT-GUARD" in rig.texts(EventKind.TRIP)[:1]


def test_a_journal_that_is_not_written_quenches_after_its_delay() -> None:
    async def script(rig: DeepRig) -> None:
        await started(rig)
        rig.journal.trouble_text = "disk full"
        began_ns = rig.clock.now_ns()
        await rig.until(lambda: rig.texts(EventKind.TRIP), 10)
        assert 5e9 <= rig.clock.now_ns() - began_ns < 6e9
        rig.live.signalled()
        rig.live.signalled()

    rig, end = play(script)
    assert end.exit_code == 1
    assert "trip: FAULT-JOURNAL" in rig.texts(EventKind.TRIP)


def test_a_lost_alert_path_flushes_the_rig_and_the_record_says_why() -> None:
    async def script(rig: DeepRig) -> None:
        await started(rig)
        rig.live._vigil.alerts = lambda: "nobody could be alerted for 601 s"
        await rig.until(lambda: rig.texts(EventKind.TRIP), 5)
        assert "stop: quench" in rig.texts(EventKind.STOP)
        rig.live.signalled()
        rig.live.signalled()

    rig, end = play(script)
    assert end.exit_code == 1
    assert rig.texts(EventKind.TRIP)[0] == "trip: ALERTS-DOWN"


def test_a_pulled_pump_cable_cuts_and_the_pumps_stop_when_it_is_back() -> None:
    async def script(rig: DeepRig) -> None:
        await started(rig)
        await rig.pull("bus-1")
        await asyncio.sleep(5)
        assert rig.live.devices[0].link.state is LinkState.FAILED
        rig.pulled.discard("bus-1")

    rig, end = play(script)
    assert end.exit_code == 1
    assert any(text.startswith("trip: LINK-") for text in rig.texts(EventKind.TRIP))
    assert flows(rig) == pytest.approx(0, abs=0.02)  # the line relaxes


def test_a_real_rig_waits_for_a_person(monkeypatch: pytest.MonkeyPatch) -> None:
    """Devices that do not say that they are simulated are never started by the attendant."""

    async def script(rig: DeepRig) -> None:
        monkeypatch.setattr(Attendant, "all_simulated", lambda self: False)
        await asyncio.sleep(60)
        assert "request: reset" not in rig.texts(EventKind.REQUEST)
        assert not any(order.action is Action.DELIVER for order in rig.journal.orders)
        rig.live.signalled()

    _, end = play(script)
    assert end.exit_code == 1


def test_the_same_seed_gives_the_same_run() -> None:
    def once() -> list[Any]:
        async def script(rig: DeepRig) -> None:
            await asyncio.sleep(8)
            rig.live.signalled()

        rig, _ = play(script)
        return [rig.journal.orders, rig.journal.events]

    assert once() == once()


def test_a_journal_of_the_run_replays_to_the_same_orders_and_events(tmp_path: Path) -> None:
    async def script(rig: DeepRig) -> None:
        await started(rig)
        rig.inject("block", "L-4")
        await rig.until(lambda: rig.texts(EventKind.TRIP), 120)

    rig, end = play(script)
    assert end.exit_code == 1
    assert rig.texts(EventKind.TRIP)[0] == "trip: PRESSURE-HIGH"
    journal = SqliteJournal(tmp_path / "run.sqlite", {}, PAIR.rig.tags)
    for number, now_ns, intake in rig.journal.intakes:
        journal.scan(number, now_ns, "", intake)
        journal.decided(number, [], [])
    journal.close(end.outcome)
    program = rig.live.given.program
    orders, events = [], []
    with JournalReader(tmp_path) as reader:
        state = core.initial(program, 0)
        for record in reader.scans():
            step = core.scan(program, state, record.intake, record.now_ns)
            state = step.state
            orders += step.orders
            events += step.events
    assert orders == rig.journal.orders
    assert events == rig.journal.events


def test_a_bug_in_a_task_ends_everything_at_once(monkeypatch: pytest.MonkeyPatch) -> None:
    async def broken(*_: object) -> None:
        raise ZeroDivisionError("a bug in a driver")

    async def main() -> None:
        assert PAIR.recipe is not None
        rig = DeepRig(PAIR.rig, PAIR.recipe)
        monkeypatch.setattr(type(driver_family("chiller").make(PAIR.rig.devices[6])), "poll", broken)
        with pytest.raises(ExceptionGroup) as caught:
            await rig.run()
        assert caught.group_contains(ZeroDivisionError)

    run_virtually(main())


def test_a_timeout_of_the_library_is_not_confused_with_a_link(monkeypatch: pytest.MonkeyPatch) -> None:
    async def script(rig: DeepRig) -> None:
        await started(rig)
        device = next(device for device in rig.live.devices if device.spec.id == "sensors")

        async def silent(*_: object) -> None:
            raise LinkTimeout("no reply")

        monkeypatch.setattr(device._driver, "poll", silent)

    rig, end = play(script)
    assert end.exit_code == 1
    assert any("sensors" in text or "PRESSURE" in text for text in rig.texts(EventKind.TRIP))
