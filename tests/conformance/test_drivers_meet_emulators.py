"""The two independent readings of the manual, face to face: our drivers on the emulated lines."""

from __future__ import annotations

import asyncio
import contextlib
import re
from collections.abc import AsyncIterator, Awaitable, Callable
from dataclasses import dataclass

import pytest
from fakes.emulated import Master, chiller_line, ir_line, pump_line, sensor_line, valve_line

from rigd.adapters.memory_link import memory_pair
from rigd.conformance.bench import comparable, order, run
from rigd.model.devices import DeviceSpec, LinkSpec, PumpState
from rigd.model.errors import DeviceRefused
from rigd.model.orders import Action
from rigd.ports.driver import Driver, DriverFamily
from rigd.runtime.line import LinkLine
from rigd_drivers import chiller, ir_cell, selector_valve, sensor_module, syringe_pump
from rigd_drivers.ir_cell.driver import IrCell


@dataclass
class Pair:
    """A driver on a line to an emulated device; ``wait`` lets the device's time pass."""

    driver: Driver
    line: LinkLine
    master: Master

    async def told(self, *channels: str) -> dict[str, tuple[float | None, str]]:
        return comparable(await self.driver.poll(self.line, channels))

    async def do(self, action: Action, value: float = 0.0) -> None:
        await self.driver.execute(self.line, order(action, value))

    def wait(self, span_s: float) -> None:
        self.master.wait(span_s)

    def last_will_holds(self) -> bool:
        """Send frames and checks as the guard does."""
        will = self.driver.last_will(LinkSpec("bus", "memory"))
        return all(re.search(f.good_reply, self.master.send(f.request)) for f in (*will.frames, *will.check))


@contextlib.asynccontextmanager
async def pair(family: DriverFamily, spec: DeviceSpec, master: Master) -> AsyncIterator[Pair]:
    near, far = memory_pair()

    async def serve() -> None:
        while True:
            answer = master.send(await far.read())
            if answer:
                await far.write(answer)

    serving = asyncio.create_task(serve())
    one = Pair(family.make(spec), LinkLine(near, name="bus", timeout_s=0.3), master)
    assert (await one.driver.identify(one.line)).simulated
    assert await one.driver.prepare(one.line) is True
    assert await one.driver.prepare(one.line) is False
    yield one
    serving.cancel()
    with contextlib.suppress(asyncio.CancelledError):
        await serving


def spec(driver: str, address: str, dialect: str = "bracket", **facts: object) -> DeviceSpec:
    return DeviceSpec(driver, driver, dialect, "bus", address, "unit", (), facts=facts)


PUMP = spec("syringe-pump", "11", syringes=2, bore_mm=10.3, stroke_mL=5.0)


def virtual(test: Callable[[], Awaitable[None]]) -> Callable[[], None]:
    def plain() -> None:
        run(test())

    plain.__name__ = test.__name__
    return plain


@virtual
async def test_a_pump_delivers_fills_swaps_and_stops() -> None:
    async with pair(syringe_pump.FAMILY, PUMP, pump_line({"level_mL": "4.000", "standby_mL": "0.000"})) as on:
        await on.do(Action.DELIVER, 0.5)
        with pytest.raises(DeviceRefused, match="state"):
            await on.do(Action.SWAP)
        await on.do(Action.FILL, 5.0)
        for _ in range(10):
            on.wait(6.0)
            told = await on.told("flow", "state")
        assert told == {"flow": (0.5, ""), "state": (PumpState.DELIVERING, "")}
        assert (await on.told("standby"))["standby"][0] == pytest.approx(5.0, abs=0.01)
        assert (await on.told("delivered"))["delivered"][0] == pytest.approx(0.5, abs=0.02)
        await on.do(Action.SWAP)
        assert (await on.told("level"))["level"][0] == pytest.approx(5.0, abs=0.01)
        await on.do(Action.STOP)
        on.wait(1.0)
        assert await on.told("flow", "state") == {"flow": (0.0, ""), "state": (PumpState.STOPPED, "")}


@virtual
async def test_the_last_will_stops_a_pump_whose_driver_just_spoke() -> None:
    async with pair(syringe_pump.FAMILY, PUMP, pump_line()) as on:
        for _ in range(3):
            await on.do(Action.DELIVER, 1.0)
            on.wait(1.0)
            on.last_will_holds()
            on.wait(1.0)
            assert on.last_will_holds()
            assert (await on.told("state"))["state"][0] == PumpState.STOPPED


@virtual
async def test_a_pump_that_hears_nothing_for_ten_seconds_stops_by_itself() -> None:
    async with pair(syringe_pump.FAMILY, PUMP, pump_line()) as on:
        await on.do(Action.DELIVER, 0.5)
        on.wait(9.0)
        assert (await on.told("state"))["state"][0] == PumpState.DELIVERING
        on.wait(11.0)
        assert (await on.told("state"))["state"][0] == PumpState.STOPPED


@virtual
async def test_a_valve_moves_and_its_last_will_brings_it_to_rest() -> None:
    names = ("port-0", "port-1", "port-2")
    valve = spec("selector-valve", "21", positions=names, rest="port-0")
    async with pair(selector_valve.FAMILY, valve, valve_line()) as on:
        await on.do(Action.MOVE, 2.0)
        assert await on.told("position") == {"position": (-1.0, "")}
        on.wait(2.0)
        assert await on.told("position") == {"position": (2.0, "")}
        assert not on.last_will_holds()
        on.wait(2.0)
        assert on.last_will_holds()
        assert await on.told("position") == {"position": (0.0, "")}


@virtual
async def test_sensors_tell_values_and_broken_inputs() -> None:
    sensors = spec("sensor-module", "31", spans={"p1": (0.0, 25.0), "t1": (-50.0, 150.0)})
    async with pair(sensor_module.FAMILY, sensors, sensor_line({"p1": "0.412/10244", "t1": "OPEN"})) as on:
        told = await on.told("p1", "t1")
        assert told["p1"] == (0.412, "")
        assert told["t1"] == (None, "OPEN: broken sensor")


@virtual
async def test_spectra_come_with_their_grid() -> None:
    async with pair(ir_cell.FAMILY, spec("ir-cell", "41"), ir_line()) as on:
        assert isinstance(on.driver, IrCell)
        assert (await on.driver.spectrum(on.line)).absorbance == ()
        on.wait(12.0)
        assert (await on.told("count"))["count"][0] == 2.0
        spectrum = await on.driver.spectrum(on.line)
        assert (len(spectrum.absorbance), spectrum.start_per_cm, spectrum.step_per_cm) == (5, 860.0, 4.0)


@virtual
async def test_a_chiller_is_set_and_read_back() -> None:
    async with pair(chiller.FAMILY, spec("chiller", "", "plain"), chiller_line()) as on:
        await on.do(Action.SET_TEMPERATURE, 60.0)
        await on.do(Action.CIRCULATE, 1.0)
        told = await on.told("bath", "setpoint", "circulating")
        assert (told["setpoint"], told["circulating"]) == ((60.0, ""), (1.0, ""))
        with pytest.raises(DeviceRefused, match="RANGE"):
            await on.do(Action.SET_TEMPERATURE, 99.0)
        assert on.last_will_holds()
