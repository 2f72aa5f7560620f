"""What the rules of a rig leave open, on the example rig with one thing taken away; and a word for every condition."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import pytest

from rigd.config import load_rig
from rigd.model.protection import Condition, ConditionKind
from rigd.model.rig import RigDefinition
from rigd.report.cause_effect import LEGEND, matrix
from rigd.report.cause_words import condition_words
from rigd.report.early_sight import early_sight
from rigd.report.gaps import gaps

RIGS = Path(__file__).parents[2] / "configs" / "rigs"


@pytest.fixture(scope="module")
def rig() -> RigDefinition:
    return load_rig(RIGS / "two-pump-column.toml")


def found(rig: RigDefinition, code: str) -> list[str]:
    return [gap.what for gap in gaps(rig) if gap.code == code]


def with_valve(rig: RigDefinition, name: str, **change: object) -> RigDefinition:
    valves = tuple(replace(valve, **change) if valve.id == name else valve for valve in rig.valves)  # type: ignore[arg-type]
    return replace(rig, valves=valves)


def test_the_example_rig_lacks_what_it_has_no_sensor_for(rig: RigDefinition) -> None:
    assert found(rig, "rated-part-without-trip") == found(rig, "actuator-without-rest") == []
    assert [what[-4:-1] for what in found(rig, "cause-unseen")] == ["C02", "C05", "C08", "C12", "C15", "C18"]


def test_a_rated_part_without_a_trip_is_named_with_its_rating(rig: RigDefinition) -> None:
    bare = replace(rig, interlocks=tuple(lock for lock in rig.interlocks if lock.id != "PRESSURE-HIGH"))
    (what,) = found(bare, "rated-part-without-trip")
    assert "PU-A, PU-B" in what
    assert "20 bar" in what


def test_a_pressure_trip_that_goes_on_pumping_holds_no_rating(rig: RigDefinition) -> None:
    soft = tuple(
        replace(lock, stop=type(lock.stop).QUENCH) if lock.id == "PRESSURE-HIGH" else lock for lock in rig.interlocks
    )
    assert found(replace(rig, interlocks=soft), "rated-part-without-trip")


ACTUATORS = [
    ("V-A", {"device": ""}, "turned by hand"),
    ("V-A", {"rest": "reagent"}, "draws acid-feed"),
    ("V-C", {"rest": "shut"}, "no way out"),
]


@pytest.mark.parametrize(("valve", "change", "said"), ACTUATORS)
def test_an_actuator_without_a_rest_is_named(
    valve: str, change: dict[str, object], said: str, rig: RigDefinition
) -> None:
    (what,) = found(with_valve(rig, valve, **change), "actuator-without-rest")
    assert valve in what
    assert said in what


def test_every_kind_of_condition_has_words(rig: RigDefinition) -> None:
    words = {condition_words(rig, Condition(kind, "PT-1", 8.0, reference="PT-2")) for kind in ConditionKind}
    assert len(words) == len(ConditionKind)
    assert condition_words(rig, Condition(ConditionKind.EQUALS, "PU-A.state", 3.0)) == "PU-A.state is stalled"
    assert condition_words(rig, Condition(ConditionKind.HIGH, "PT-1.resistance", 1.4)) == "PT-1.resistance above 140 %"


@pytest.mark.parametrize("path", sorted(RIGS.glob("*.toml")), ids=lambda path: path.stem)
def test_every_rule_of_every_example_rig_is_in_a_row_and_every_letter_in_the_legend(path: Path) -> None:
    rig = load_rig(path)
    whole = matrix(rig)
    names = [row.id for row in whole.rows]
    assert len(names) == len(set(zip(names, (row.stop for row in whole.rows), strict=True)))
    rules = [lock.id for lock in rig.interlocks] + [alarm.id for alarm in rig.alarms]
    beginnings = tuple(name.removesuffix("…") for name in names)
    assert all(rule.startswith(beginnings) for rule in rules)
    assert {cell[0] for row in whole.rows for cell in row.cells.values()} <= set(LEGEND)
    assert all(set(row.cells) <= set(whole.columns) for row in whole.rows)


def test_what_is_watched_early_is_told_with_the_flow_from_which_it_shows(rig: RigDefinition) -> None:
    """The band over the change of the declared drop: twice the change shows at half the flow."""
    one, last = early_sight(rig)
    assert (one.stretch, one.change) == ("from PT-1 to PT-2 (COL)", pytest.approx(0.4))
    assert 1.0 < one.from_mL_min < 4.0
    moved = tuple(
        replace(alarm, condition=replace(alarm.condition, limit=1.8)) if alarm.id == "CLOG-PT-1" else alarm
        for alarm in rig.alarms
    )
    assert early_sight(replace(rig, alarms=moved))[0].from_mL_min == pytest.approx(one.from_mL_min / 2)
    assert "to the outlet" in last.stretch
