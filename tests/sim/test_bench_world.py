"""Process time of a served rig: tied to the wall, never standing still, never jumping over a time-out."""

from __future__ import annotations

import pytest
from fakes.emulated import request
from fakes.plain_plant import PlainPlant
from fakes.small_rig import PLAIN, plain_plant, small_rig
from hypothesis import given
from hypothesis import strategies as st

from rigd.model.errors import ConfigError
from rigd.ports.plant import FaultSpec
from rigd_sim.bench.warm import warm_up
from rigd_sim.bench.world import World
from rigd_sim.emulators.assemble import emulated_lines
from rigd_sim.emulators.line_faults import LINE_KINDS


def world(pace: float = 1.0) -> tuple[World, PlainPlant]:
    """The small rig and its plant."""
    rig, plant = small_rig(), plain_plant(small_rig(), 1)
    devices = {spec.id: spec.link for spec in rig.devices}
    return World(plant, emulated_lines(rig, plant, pace), devices, PLAIN.fault_kinds(), LINE_KINDS, pace), plant


def say(it: World, words: str, number: str = "01") -> str:
    """One exchange with the pump."""
    return "".join(data.decode() for _, _, data in it.feed("bus", request("11", number, words)))


@given(st.lists(st.floats(0, 2), max_size=20), st.sampled_from([1.0, 7.0, 50.0]))
def test_process_time_is_wall_time_times_the_pace(moments: list[float], pace: float) -> None:
    it, plant = world(pace)
    for moment in moments:
        it.advance(moment)
        assert plant.now_ns == round(it.now_s * 1e9)
    assert it.now_s == pytest.approx(max(moments, default=0.0) * pace)


@pytest.mark.parametrize("pace", [1.0, 20.0])
def test_a_server_that_stood_still_still_lets_the_time_out_act_in_time(pace: float) -> None:
    it, plant = world(pace)
    assert "ok" in say(it, "silence 2")
    assert "ok" in say(it, "rate 5", "02")
    it.advance(60.0)
    # 2 s of wall at 5 mL/min, not 60; the slices are 0.05 s
    assert plant.truth()["level:P"] == pytest.approx(5 - 5 / 60 * 2 * pace, abs=5 / 60 * 0.1 * pace)


def test_faults_are_listed_until_they_end_or_are_cleared() -> None:
    it, plant = world()
    it.inject(FaultSpec("known", "anything", 0.0, 1.0))
    it.inject(FaultSpec("device-mute", "pump", 0.0))
    it.inject(FaultSpec("line-dead", "port", 5.0, 1.0))
    assert [fault.kind for fault in it.faults()] == ["known", "device-mute", "line-dead"]
    it.advance(2.0)
    assert [fault.kind for fault in it.faults()] == ["device-mute", "line-dead"]
    assert it.clear("device-mute", "pump") == 1
    assert it.clear("device-mute", "pump") == 0
    assert "state=" in say(it, "status?")
    assert it.clear("known", "anything") == 1
    assert plant.faults == []


@pytest.mark.parametrize(
    ("kind", "target", "why"),
    [("fire", "pump", "name one of known, line-dead"), ("line-dead", "nowhere", "name one of bus, chiller, port")],
)
def test_a_fault_that_cannot_be_is_refused_with_what_can(kind: str, target: str, why: str) -> None:
    it, _ = world()
    with pytest.raises(ConfigError, match=why):
        it.inject(FaultSpec(kind, target))
    assert list(it.faults()) == []


def test_warm_up_moves_everything_of_a_plant() -> None:
    plant = plain_plant(small_rig(), 1)
    before = {name: unit.channels() for name, unit in plant.units.items()}
    warm_up(plant, small_rig())
    assert all(unit.channels() != before[name] for name, unit in plant.units.items())
