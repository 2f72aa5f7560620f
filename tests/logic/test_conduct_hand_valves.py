"""A valve that a person turns: asked for, confirmed, and a hold when nobody comes."""

from __future__ import annotations

from dataclasses import replace

import pytest
from fakes.conduct_rigs import demo_recipe, sweep_point, two_pumps
from fakes.conduct_run import ConductRun

from rigd.logic.conduct import demands
from rigd.model.events import EventKind
from rigd.model.orders import Verb


def by_hand() -> ConductRun:
    """A run whose outlet valve has no drive."""
    rig = two_pumps()
    valves = tuple(replace(valve, device="") if valve.id == "V-OUT" else valve for valve in rig.valves)
    recipe = replace(demo_recipe((sweep_point("P1", 2.0),), True), leak_test=None)
    run = ConductRun(replace(rig, valves=valves), recipe)
    run.start()
    return run


def asked(run: ConductRun) -> list[str]:
    return [one.id for one in run.state.prompts.values() if one.status == "open"]


def test_it_is_asked_for_and_the_run_goes_on_when_it_is_confirmed() -> None:
    run = by_hand()
    for wanted in ("collect", "waste"):
        assert run.until(lambda r: bool(asked(r)), 6000.0)
        assert asked(run) == [f"valve-V-OUT-{wanted}"]
        run.until(lambda r: False, 30.0)
        run.ask(Verb.CONFIRM, "*")
        run.scan()
    assert run.finish() == "done"


def test_the_run_holds_when_nobody_comes_and_asks_again_after_that(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(demands, "HAND_NS", 40_000_000_000)
    run = by_hand()
    assert run.until(lambda r: bool(asked(r)), 6000.0)
    since_s = run.now_s
    assert run.until(lambda r: r.summary()["state"] == "HELD", 900.0)
    assert 40.0 <= run.now_s - since_s < 60.0
    assert "nobody has confirmed within 0.666667 min: Turn V-OUT" in run.of(EventKind.RUN_STATE, "HOLDING")[0].text
    run.ask(Verb.RESUME)
    run.until(lambda r: False, 1.0)
    assert run.summary()["state"] != "HELD"
    while not run.until(lambda r: not asked(r) and r.summary()["state"] == "COMPLETE", 30.0):
        run.ask(Verb.CONFIRM, "*")
        assert run.now_s < 40_000.0
