"""Options, addresses and facts that cannot be right are refused when the rig file is loaded, each with a remedy."""

from __future__ import annotations

import re
from dataclasses import replace

import pytest

from rigd.model.devices import DeviceSpec
from rigd.model.errors import ConfigError
from rigd.ports.driver import DriverFamily
from rigd_drivers import chiller, selector_valve, sensor_module, syringe_pump

PUMP = DeviceSpec("pump-a", "syringe-pump", "bracket", "bus", "11", "PU-A", ())
VALVE = DeviceSpec("valve-a", "selector-valve", "bracket", "bus", "21", "V-A", ())
SENSORS = DeviceSpec("sensors", "sensor-module", "bracket", "bus", "31", "", ())
BATH = DeviceSpec("chiller", "chiller", "plain", "bus", "", "CH", ())


def problems(family: DriverFamily, spec: DeviceSpec) -> str:
    with pytest.raises(ConfigError) as refused:
        family.make(spec)
    return str(refused.value)


@pytest.mark.parametrize(
    ("family", "spec", "options", "words"),
    [
        (syringe_pump.FAMILY, PUMP, {"silence": 10}, "a time is text with a unit such as '10 s'"),
        (syringe_pump.FAMILY, PUMP, {"silence": "10"}, "'10' has no unit"),
        (syringe_pump.FAMILY, PUMP, {"silence": "2 h"}, "less than or equal to 3600 -- time without a request"),
        (syringe_pump.FAMILY, PUMP, {"silence": "-1 s"}, "greater than or equal to 0"),
        (syringe_pump.FAMILY, PUMP, {"silense": "1 s"}, r"unknown option 'silense' -- did you mean 'silence'\?"),
        (sensor_module.FAMILY, SENSORS, {"silence": "1 s"}, "unknown option 'silence' -- known: none"),
        (chiller.FAMILY, BATH, {"when_lost": "maybe"}, "'keep' or 'off'"),
    ],
)
def test_wrong_options_say_what_is_allowed(
    family: DriverFamily, spec: DeviceSpec, options: dict[str, object], words: str
) -> None:
    text = problems(family, replace(spec, options=options))
    assert re.search(words, text), text
    assert f"devices[{spec.id}].options.{next(iter(options))}" in text


@pytest.mark.parametrize("address", ["", "1", "00", "100", "1a", "²1"])
def test_addresses_are_two_digits(address: str) -> None:
    assert "'01' to '99'" in problems(syringe_pump.FAMILY, replace(PUMP, address=address))


def test_a_device_alone_on_its_line_has_no_address() -> None:
    assert "leave it out" in problems(chiller.FAMILY, replace(BATH, address="11"))


def test_a_valve_must_rest_where_the_device_rests() -> None:
    text = problems(selector_valve.FAMILY, replace(VALVE, facts={"positions": ["a", "b"], "rest": "b"}))
    assert "rest in 'b', but by itself it goes to its first position, 'a'" in text


def test_all_that_is_wrong_with_a_device_is_said_at_once() -> None:
    text = problems(syringe_pump.FAMILY, replace(PUMP, dialect="plain", address="x"))
    assert "dialect 'plain'" in text
    assert "address 'x'" in text
