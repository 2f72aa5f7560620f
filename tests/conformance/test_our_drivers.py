"""All five families against the battery."""

from __future__ import annotations

import re
from typing import Any

from fakes.paper_device import PaperDevice, meaning, reply

from rigd.conformance import DriverContract
from rigd.conformance.bench import DriverCase
from rigd.model.devices import DeviceSpec
from rigd.model.orders import Action
from rigd_drivers import chiller, ir_cell, selector_valve, sensor_module, syringe_pump


def spec(driver: str, address: str, dialect: str = "bracket", **facts: object) -> DeviceSpec:
    return DeviceSpec(f"the-{driver}", driver, dialect, "bench", address, "unit", (), facts={"retries": 2, **facts})


def exchanged(device: PaperDevice) -> None:
    """Another one of the same make is at the end of the cable."""
    words = "ID" if device.plain else "who?"
    device.say(words, re.sub(r"-00|(?<= )00", "-77", device.book[words], count=1))


def pump() -> PaperDevice:
    device = PaperDevice("syringe_pump", "who is there, after power-on", "deliver, change the rate, stop")
    device.say("status?", "ok state=stopped flow=0.0000 level=4.900 standby=5.000 delivered=0.1000 fault=0")
    for words in ("fill 5.000", "swap"):
        device.say(words, "ok")
    return device


def pump_delivers(device: PaperDevice) -> None:
    device.say("status?", "ok state=delivering flow=0.2500 level=4.800 standby=4.000 delivered=0.2000 fault=0")


class TestSyringePump(DriverContract):
    case = DriverCase(
        family=syringe_pump.FAMILY,
        spec=spec("syringe-pump", "11", syringes=2, bore_mm=10.3, stroke_mL=5.0),
        peer=pump,
        moved=pump_delivers,
        meaning=meaning,
        exchanged=exchanged,
        simulated=True,
        orders={Action.DELIVER: 1.0, Action.FILL: 5.0, Action.SWAP: 0.0, Action.STOP: 0.0},
        stop=(Action.STOP,),
        foreign=reply(
            b"12", b"05", "ok state=delivering flow=9.9999 level=1.000 standby=1.000 delivered=9.0000 fault=0"
        ),
    )


def valve() -> PaperDevice:
    return PaperDevice("selector_valve", "who is there, after power-on", "move")


class TestSelectorValve(DriverContract):
    case = DriverCase(
        family=selector_valve.FAMILY,
        spec=spec("selector-valve", "21", positions=("waste", "collect", "shut"), rest="waste"),
        peer=valve,
        moved=lambda device: device.say("at?", "ok at=2"),
        meaning=meaning,
        exchanged=exchanged,
        simulated=True,
        orders={Action.MOVE: 0.0},
        stop=(Action.MOVE,),
        foreign=reply(b"22", b"05", "ok at=3"),
    )


def sensors() -> PaperDevice:
    device = PaperDevice("sensor_module", "who is there, after power-on", "read")
    _sense(device, p1="0.412/10244", t1="OPEN/0")
    return device


def _sense(device: PaperDevice, **values: str) -> None:
    for asked in ([name] for name in values):
        device.say("read? " + " ".join(asked), "ok " + " ".join(f"{name}={values[name]}" for name in asked))
    device.say("read? " + " ".join(values), "ok " + " ".join(f"{name}={text}" for name, text in values.items()))


class TestSensorModule(DriverContract):
    case = DriverCase(
        family=sensor_module.FAMILY,
        spec=spec("sensor-module", "31", spans={"p1": (0.0, 25.0), "t1": (-50.0, 150.0)}),
        peer=sensors,
        moved=lambda device: _sense(device, p1="8.412/18244", t1="59.98/20998"),
        meaning=meaning,
        exchanged=exchanged,
        simulated=True,
        foreign=reply(b"32", b"05", "ok p1=9.000/9 t1=9.00/9"),
        channels=("p1", "t1"),
    )


class TestIrCell(DriverContract):
    case = DriverCase(
        family=ir_cell.FAMILY,
        spec=spec("ir-cell", "41"),
        peer=lambda: PaperDevice("ir_cell", "who is there, after power-on"),
        moved=lambda device: device.say("count?", "ok count=3"),
        meaning=meaning,
        exchanged=exchanged,
        simulated=True,
        foreign=reply(b"42", b"05", "ok count=99"),
    )


def bath() -> PaperDevice:
    device = PaperDevice("chiller", "who is there, after power-on", "set-point and circulation")
    device.say("STATUS", "STATUS 000")
    device.say("SET", "SET 60.0")
    device.say("RUN", "RUN 0")
    device.say("BATH", "BATH 122.05")
    return device


def bath_moves(device: Any) -> None:
    device.say("SET", "SET -5.5")
    device.say("BATH", "BATH 59.98")
    device.say("RUN", "RUN 1")


class TestChiller(DriverContract):
    case = DriverCase(
        family=chiller.FAMILY,
        spec=DeviceSpec(
            "the-chiller", "chiller", "plain", "bench", "", "CH", (), options={"when_lost": "off"}, facts={"retries": 2}
        ),
        peer=bath,
        moved=bath_moves,
        meaning=meaning,
        exchanged=exchanged,
        simulated=True,
        orders={Action.SET_TEMPERATURE: 60.0, Action.CIRCULATE: 0.0},
        stop=(Action.CIRCULATE,),
        checked=False,
        foreign=b"BATH 1.00\x00\r\nOK\r\nSET 9.99\r\n",
    )
