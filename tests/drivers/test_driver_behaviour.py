"""What each driver does beyond the battery: settings, comparisons with the rig file, restarts, faults, refusals."""

from __future__ import annotations

import asyncio
import contextlib
import re
from collections.abc import AsyncIterator
from dataclasses import replace

import pytest
from fakes.paper_device import PaperDevice, reply

from rigd.adapters.memory_link import memory_pair
from rigd.model.devices import DeviceSpec, LinkSpec
from rigd.model.errors import DeviceProtocolError, DeviceRefused, LinkTimeout, WrongDevice
from rigd.model.orders import Action, Authority, Order
from rigd.ports.driver import Driver, DriverFamily
from rigd.runtime.line import LinkLine
from rigd_drivers import chiller, ir_cell, selector_valve, sensor_module, syringe_pump
from rigd_drivers.conversation import FLAGS_EVERY
from rigd_drivers.ir_cell.driver import IrCell

POWER_ON = "who is there, after power-on"
PUMP = DeviceSpec(
    "pump-a",
    "syringe-pump",
    "bracket",
    "bus",
    "11",
    "PU-A",
    (),
    facts={"syringes": 2, "bore_mm": 10.3, "stroke_mL": 5.0},
)
VALVE = DeviceSpec(
    "valve-a", "selector-valve", "bracket", "bus", "21", "V-A", (), facts={"positions": ("a", "b", "c"), "rest": "a"}
)
SENSORS = DeviceSpec("sensors", "sensor-module", "bracket", "bus", "31", "", (), facts={"spans": {"p1": (0.0, 25.0)}})
CELL = DeviceSpec("ir", "ir-cell", "bracket", "bus", "41", "", ())
BATH = DeviceSpec("chiller", "chiller", "plain", "bus", "", "CH", ())
LINK = LinkSpec("bus", "memory")


def order(action: Action, value: float = 0.0) -> Order:
    return Order(1, "unit", action, value, Authority.SEQUENCE, "test", 0)


@contextlib.asynccontextmanager
async def served(device: PaperDevice) -> AsyncIterator[LinkLine]:
    near, far = memory_pair()

    async def serve() -> None:
        while True:
            answer = device.feed(await far.read())
            if answer:
                await far.write(answer)

    serving = asyncio.create_task(serve())
    yield LinkLine(near, name="bus", timeout_s=0.05)
    serving.cancel()
    with contextlib.suppress(asyncio.CancelledError):
        await serving


def pump_on_paper() -> PaperDevice:
    return PaperDevice("syringe_pump", POWER_ON, "deliver, change the rate, stop")


def status(state: str = "stopped", delivered: float = 0.0, fault: int = 0) -> str:
    return f"ok state={state} flow=0.0000 level=5.000 standby=5.000 delivered={delivered:.4f} fault={fault}"


# --- prepare


async def test_the_pump_is_told_when_to_stop_by_itself_and_the_restart_is_seen_last() -> None:
    device, driver = pump_on_paper(), syringe_pump.FAMILY.make(PUMP)
    device.say("flags?", "ok restarted=1 fault=0")
    async with served(device) as line:
        assert await driver.prepare(line) is True
        assert device.carried_out == ["flags?", "silence 10.0", "silence?", "bores?", "seen"]
        device.say("flags?", "ok restarted=0 fault=0")
        device.carried_out.clear()
        assert await driver.prepare(line) is False
        assert device.carried_out == ["flags?", "silence 10.0", "silence?", "bores?"]


async def test_a_communication_timeout_that_is_not_in_force_is_told() -> None:
    device = pump_on_paper()
    driver = syringe_pump.FAMILY.make(replace(PUMP, options={"silence": "5 s"}))
    device.say("silence 5.0", "ok")
    async with served(device) as line:
        with pytest.raises(DeviceProtocolError, match="set to 5 s, but 10 s is in force"):
            await driver.prepare(line)


@pytest.mark.parametrize(
    ("found", "words"),
    [
        ("n=1 bore=10.30 stroke=5.000", "number of syringes 1, rig file 2"),
        ("n=2 bore=4.61 stroke=5.000", r"bore \[mm\] 4.61, rig file 10.3"),
        ("n=2 bore=10.30 stroke=2.500", r"stroke volume \[mL\] 2.5, rig file 5"),
    ],
)
async def test_other_syringes_than_in_the_rig_file_are_refused(found: str, words: str) -> None:
    device, driver = pump_on_paper(), syringe_pump.FAMILY.make(PUMP)
    device.say("flags?", "ok restarted=1 fault=0")
    device.say("bores?", f"ok {found}")
    async with served(device) as line:
        with pytest.raises(DeviceRefused, match=words) as refused:
            await driver.prepare(line)
    assert isinstance(refused.value, WrongDevice)
    assert "seen" not in device.carried_out


async def test_a_valve_with_another_number_of_positions_is_refused() -> None:
    device, driver = PaperDevice("selector_valve", POWER_ON), selector_valve.FAMILY.make(VALVE)
    device.say("positions?", "ok n=4")
    async with served(device) as line:
        with pytest.raises(WrongDevice, match=r"has 4 positions, the rig file names 3 \(a, b, c\)"):
            await driver.prepare(line)


async def test_a_sensor_with_another_span_is_refused() -> None:
    device, driver = PaperDevice("sensor_module", POWER_ON, "read"), sensor_module.FAMILY.make(SENSORS)
    async with served(device) as line:
        await driver.prepare(line)
        device.say("span? p1", "ok low=0.000 high=250.000 unit=bar")
        with pytest.raises(WrongDevice, match="span of 0 to 250 bar, the rig file 0 to 25 bar"):
            await driver.prepare(line)
        device.say("span? p1", "ok low=0.000 high=25.000 unit=psi")
        with pytest.raises(WrongDevice, match="psi"):
            await driver.prepare(line)


# --- identify


async def test_another_model_at_the_address_is_refused() -> None:
    device, driver = pump_on_paper(), syringe_pump.FAMILY.make(PUMP)
    device.say("who?", "ok bench SV3 SV3-0007 1.0")
    async with served(device) as line:
        with pytest.raises(WrongDevice, match=r"bench SV3 \(SV3-0007\) answers at address 11, but a SP2 is needed"):
            await driver.identify(line)


@pytest.mark.parametrize("old", ["ok", "no value 9.0000", "ok 10.0", status()])
async def test_the_repeated_answer_to_a_predecessor_is_not_taken_for_the_identity(old: str) -> None:
    """The device repeats its last reply when our first number is by chance the last one of the control before us."""
    device, driver = pump_on_paper(), syringe_pump.FAMILY.make(PUMP)
    device._last = (b"01", reply(b"11", b"01", old))
    async with served(device) as line:
        assert (await driver.identify(line)).serial_no == "SP2-0011"


async def test_a_chiller_that_caught_noise_is_asked_again() -> None:
    device, driver = PaperDevice("chiller", POWER_ON), chiller.FAMILY.make(BATH)
    device.feed(b"\x00\xff")
    async with served(device) as line:
        who = await driver.identify(line)
    assert (who.model, who.simulated) == ("CB-1", True)
    device.say("ID", "XY-9 1 1.0")
    async with served(device) as line:
        with pytest.raises(WrongDevice, match=r"XY-9 \(1\) answers, but a CB-1 is needed"):
            await driver.identify(line)


# --- orders


async def test_a_busy_device_is_asked_again_under_a_new_number() -> None:
    device, driver = pump_on_paper(), syringe_pump.FAMILY.make(PUMP)
    device.say("stop", "busy")
    async with served(device) as line:
        with pytest.raises(DeviceRefused, match="pump-a: refused 'stop': busy"):
            await driver.execute(line, order(Action.STOP))
    assert device.carried_out == ["stop"] * 3
    assert len(set(device.heard)) == 3


async def test_a_refusal_carries_the_words_of_the_device() -> None:
    device, driver = pump_on_paper(), syringe_pump.FAMILY.make(PUMP)
    async with served(device) as line:
        with pytest.raises(DeviceRefused, match=r"pump-a: refused 'rate 9\.0000': value 9\.0000 not within"):
            await driver.execute(line, order(Action.DELIVER, 9.0))
    assert device.carried_out == ["rate 9.0000"]


async def test_a_set_point_that_is_not_in_force_is_told() -> None:
    device, driver = PaperDevice("chiller", POWER_ON, "set-point and circulation"), chiller.FAMILY.make(BATH)
    device.say("SET", "SET 20.0")
    async with served(device) as line:
        with pytest.raises(DeviceProtocolError, match=r"accepted 'SET 60\.0', but SET 20 is in force"):
            await driver.execute(line, order(Action.SET_TEMPERATURE, 60.0))
        with pytest.raises(DeviceRefused, match=r"chiller: refused 'SET 95\.1': RANGE"):
            await driver.execute(line, order(Action.SET_TEMPERATURE, 95.1))
        device.say("RUN 1", "ERR LEVEL")
        with pytest.raises(DeviceRefused, match="LEVEL"):
            await driver.execute(line, order(Action.CIRCULATE, 1.0))


# --- restarts and faults while polled


async def test_a_counter_that_falls_is_a_restart_until_the_pump_is_prepared() -> None:
    device, driver = pump_on_paper(), syringe_pump.FAMILY.make(PUMP)
    async with served(device) as line:
        await driver.prepare(line)
        device.say("status?", status(delivered=12.0))
        await driver.poll(line, ["flow"])
        device.say("status?", status(delivered=0.0))
        for _ in range(3):
            with pytest.raises(DeviceProtocolError, match="pump-a: has restarted"):
                await driver.poll(line, ["flow"])
        await driver.prepare(line)
        assert (await driver.poll(line, ["flow"]))[0].value == 0.0


@pytest.mark.parametrize(
    ("family", "spec", "transcript", "channel"),
    [
        (syringe_pump.FAMILY, PUMP, "syringe_pump", "state"),
        (selector_valve.FAMILY, VALVE, "selector_valve", "position"),
        (sensor_module.FAMILY, replace(SENSORS, facts={}), "sensor_module", "p1"),
        (ir_cell.FAMILY, CELL, "ir_cell", "count"),
    ],
)
async def test_flags_are_looked_at_now_and_then(
    family: DriverFamily, spec: DeviceSpec, transcript: str, channel: str
) -> None:
    device, driver = PaperDevice(transcript), family.make(spec)
    device.say("silence?", "ok 10.0")
    device.say("flags?", "ok restarted=0 fault=0")
    device.say("read? p1", "ok p1=0.412/10244")
    if transcript == "syringe_pump":
        device.say("status?", status())
        device.say("bores?", "ok n=2 bore=10.30 stroke=5.000")
    async with served(device) as line:
        await driver.prepare(line)
        device.say("flags?", "ok restarted=0 fault=1")
        faults = [(await driver.poll(line, [channel]))[0].fault for _ in range(FLAGS_EVERY)]
        assert faults == [""] * (FLAGS_EVERY - 1) + ["the device reports a fault"]
        device.say("flags?", "ok restarted=1 fault=0")
        for _ in range(FLAGS_EVERY - 1):
            await driver.poll(line, [channel])
        for _ in range(2):
            with pytest.raises(DeviceProtocolError, match="has restarted and lost its settings"):
                await driver.poll(line, [channel])


async def test_the_fault_of_a_pump_stands_at_its_state_only() -> None:
    device, driver = pump_on_paper(), syringe_pump.FAMILY.make(PUMP)
    device.say("status?", status(fault=1))
    async with served(device) as line:
        flow, state = await driver.poll(line, ["flow", "state"])
    assert flow.fault == ""
    assert state.fault == "the pump reports a fault"


async def test_the_chiller_tells_low_level_faults_and_restarts() -> None:
    device, driver = PaperDevice("chiller", POWER_ON), chiller.FAMILY.make(BATH)
    async with served(device) as line:
        device.say("STATUS", "STATUS 010")
        bath, circulating = await driver.poll(line, ["bath", "circulating"])
        assert (bath.value, bath.fault, circulating.fault) == (22.0, "", "low level")
        device.say("STATUS", "STATUS 100")
        with pytest.raises(DeviceProtocolError, match="has restarted"):
            await driver.poll(line, ["bath"])
        with pytest.raises(DeviceProtocolError, match="after CLEAR"):
            await driver.prepare(line)
        device.say("STATUS", "STATUS 000")
        assert await driver.prepare(line) is False


async def test_a_jump_of_the_bath_is_asked_for_once_more() -> None:
    device, driver = PaperDevice("chiller", POWER_ON), chiller.FAMILY.make(BATH)
    device.say("STATUS", "STATUS 000")
    async with served(device) as line:
        await driver.poll(line, ["bath"])
        device.carried_out.clear()
        device.say("BATH", "BATH 22.90")
        assert (await driver.poll(line, ["bath"]))[0].value == 22.9
        assert device.carried_out == ["STATUS", "BATH"]
        device.say("BATH", "BATH 24.00")
        assert (await driver.poll(line, ["bath"]))[0].value == 24.0
        assert device.carried_out == ["STATUS", "BATH", "STATUS", "BATH", "BATH"]


async def test_a_position_beyond_the_last_is_not_believed() -> None:
    device, driver = PaperDevice("selector_valve", POWER_ON), selector_valve.FAMILY.make(VALVE)
    async with served(device) as line:
        await driver.prepare(line)
        device.say("at?", "ok at=4")
        with pytest.raises(DeviceProtocolError, match="says position 4, but has 3"):
            await driver.poll(line, ["position"])


# --- spectra


async def test_spectra_are_fetched_once_each() -> None:
    device = PaperDevice("ir_cell", "two's complement, in 1e-4 absorbance: 0.0015, -0.0015, 3.2767, -3.2768, 0")
    driver = ir_cell.FAMILY.make(CELL)
    assert isinstance(driver, IrCell)
    device.say("count?", "ok count=0")
    async with served(device) as line:
        assert (await driver.spectrum(line)).absorbance == ()
        device.say("count?", "ok count=17")
        first = await driver.spectrum(line)
        assert (first.source, first.start_per_cm, first.step_per_cm) == ("ir", 1000.0, 2.5)
        assert first.absorbance == pytest.approx((0.0015, -0.0015, 3.2767, -3.2768, 0.0), abs=1e-12)
        asked = device.carried_out.count("spectrum?")
        assert await driver.spectrum(line) == first
        assert device.carried_out.count("spectrum?") == asked
        device.say("count?", "ok count=2")
        with pytest.raises(DeviceProtocolError, match="ir: has restarted"):
            await driver.spectrum(line)


# --- last wills


@pytest.mark.parametrize(
    ("answer", "good"),
    [
        ("ok state=stopped flow=0.0000 level=1.000 standby=0.000 delivered=9.0000 fault=0", True),
        ("ok state=empty flow=0 level=0.000 standby=0.000 delivered=9.0000 fault=1", True),
        ("ok state=stalled flow=-0.0000 level=1.000 standby=0.000 delivered=9.0000 fault=0", True),
        ("ok state=stopped flow=0.0001 level=1.000 standby=0.000 delivered=9.0000 fault=0", False),
        ("ok state=delivering flow=0.0000 level=1.000 standby=0.000 delivered=9.0000 fault=0", False),
        ("ok state=filling flow=0.0000 level=1.000 standby=0.000 delivered=9.0000 fault=0", False),
        ("no fault state=stopped flow=0.0000 level=1.000", False),
        ("busy", False),
    ],
)
def test_only_a_pump_without_motion_satisfies_its_last_will(answer: str, good: bool) -> None:
    *_, status_frame = syringe_pump.FAMILY.make(PUMP).last_will(LINK).check
    assert bool(re.search(status_frame.good_reply, reply(b"11", b"F2", answer))) is good
    assert not re.search(status_frame.good_reply, reply(b"12", b"F2", answer))


def test_last_wills_of_devices_that_move_nothing_are_empty() -> None:
    for family, spec in ((sensor_module.FAMILY, SENSORS), (ir_cell.FAMILY, CELL), (chiller.FAMILY, BATH)):
        will = family.make(spec).last_will(LINK)
        assert (will.frames, will.check, will.device) == ((), (), spec.id)


async def test_retries_come_from_the_link() -> None:
    device = pump_on_paper()
    for retries in (0, 4):
        driver: Driver = syringe_pump.FAMILY.make(replace(PUMP, facts={"retries": retries}))
        async with served(device) as line:
            device.address = b"99"
            device.heard.clear()
            with pytest.raises(LinkTimeout):
                await driver.poll(line, ["flow"])
            assert len(device.heard) == retries + 1
