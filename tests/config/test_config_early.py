"""The table ``[early]`` and what a rig's sensors imply: tags, alarms, limits in units, and how to have one's own."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import pytest
from fakes.config_files import RIG, THREE, edited, problems_of, rig_problems_of, write

from rigd.config import load_rig
from rigd.config.early import OFF_S, ON_S
from rigd.model.protection import Alarm, Priority

TABLE = "[early]\n{}\n\n[simulation]"
SENSORS = """[[sensors]]
tag = "FT-1"
title = "flow into the bed"
measures = "flow"
at = "COL.inlet"
span = ["0 mL/min", "10 mL/min"]
device = "sensors"
channel = "f1"

[[sensors]]
tag = "WT-1"
title = "balance under the flask"
measures = "volume"
at = "flask"
span = ["0 mL", "300 mL"]
noise = "0.2 mL"
device = "sensors"
channel = "w1"

[simulation]"""


def alarms(folder: Path, text: str) -> dict[str, Alarm]:
    return {alarm.id: alarm for alarm in load_rig(write(folder, text)[0]).alarms}


def test_the_sensors_of_the_example_rigs_imply_their_alarms(tmp_path: Path) -> None:
    named = {
        name for name in alarms(tmp_path, RIG) if name.partition("-")[0] in ("CLOG", "OPEN", "SOON", "GAS", "HEAT")
    }
    assert named == {
        "CLOG-PT-1", "CLOG-PT-2", "OPEN-PT-1", "OPEN-PT-2", "SOON-PT-1", "SOON-PT-2", "GAS-PT-1", "HEAT-TT-1",
    }  # fmt: skip
    three = alarms(tmp_path, THREE)
    assert "from PT-1 to PT-3 (COL-1)" in three["CLOG-PT-1"].title
    assert "from PT-3 to PT-2 (COL-2)" in three["CLOG-PT-3"].title


def test_every_implied_alarm_says_what_it_is_for_and_waits_for_four_looks(tmp_path: Path) -> None:
    for alarm in alarms(tmp_path, edited(RIG, ("[simulation]", SENSORS))).values():
        if alarm.condition.tag.endswith((".resistance", ".time-left", ".compliance", ".balance", ".unexplained")):
            assert alarm.action
            assert alarm.cause
            assert alarm.consequence
            assert (alarm.on_delay_ns, alarm.off_delay_ns) == (ON_S * 1e9, OFF_S * 1e9)
            assert alarm.priority in (Priority.HIGH, Priority.MEDIUM)
            assert not alarm.hold


LIMITS = [
    ('resistance_up = "60 %"', "CLOG-PT-1", 1.6),
    ('resistance_down = "20 %"', "OPEN-PT-2", 0.8),
    ('time_left = "1 h"', "SOON-PT-1", 3600.0),
    ('compliance_up = "50 %"', "GAS-PT-1", 0.03),
    ('compliance_down = "50 %"', "STIFF-PT-1", 0.01),
    ('balance = "25 %"', "SHORT-FT-1", 0.75),
    ('balance = "25 %"', "SHORT-WT-1", 0.75),
    ('heat = "4 K"', "HEAT-TT-1", 4.0),
]


@pytest.mark.parametrize(("line", "name", "limit"), LIMITS)
def test_each_key_moves_its_limit_and_no_other(line: str, name: str, limit: float, tmp_path: Path) -> None:
    plain = alarms(tmp_path, edited(RIG, ("[simulation]", SENSORS)))
    told = alarms(tmp_path, edited(RIG, ("[simulation]", SENSORS.replace("[simulation]", TABLE.format(line)))))
    assert told[name].condition.limit == pytest.approx(limit)
    assert plain[name].condition.limit != pytest.approx(limit)
    changed = {one for one in plain if replace(plain[one].condition) != replace(told[one].condition)}
    assert {one.split("-")[0] for one in changed} == {name.split("-")[0]}


WRONG = [
    ('heat = "4 degC"', "early.heat", "unit-wrong"),
    ("heat = 4", "early.heat", "unit-missing"),
    ('resistance_down = "120 %"', "early.resistance_down", "value-out-of-range"),
    ('resistance_sideways = "10 %"', "early.resistance_sideways", "key-unknown"),
]


@pytest.mark.parametrize(("line", "key", "code"), WRONG)
def test_what_is_wrong_is_said_at_its_key(line: str, key: str, code: str, tmp_path: Path) -> None:
    found = rig_problems_of(tmp_path, edited(RIG, ("[simulation]", TABLE.format(line))))
    assert [(problem.code, problem.key) for problem in found] == [(code, key)]


def test_an_alarm_of_ones_own_stands_in_the_place_of_the_implied_one(tmp_path: Path) -> None:
    own = """[[alarms]]
id = "CLOG-PT-1"
title = "my own"
when = { tag = "PT-1.resistance", above = "250 %" }
priority = "low"
action = "Look."

[simulation]"""
    found = [
        alarm for alarm in alarms(tmp_path, edited(RIG, ("[simulation]", own))).values() if alarm.title == "my own"
    ]
    assert [(alarm.id, alarm.condition.limit) for alarm in found] == [("CLOG-PT-1", 2.5)]
    assert not problems_of(tmp_path, edited(RIG, ("[simulation]", own)))


def test_no_interlock_can_look_at_what_only_warns(tmp_path: Path) -> None:
    trip = edited(
        RIG,
        (
            'trip_when = [{ tag = "TT-1", above = "75 degC" }]',
            'trip_when = [{ tag = "PT-1.resistance", above = "200 %" }]',
        ),
    )
    assert "tag-unknown" in [problem.code for problem in rig_problems_of(tmp_path, trip)]


def test_a_limit_with_nothing_to_look_at_is_said_and_others_are_not(tmp_path: Path) -> None:
    lines = "".join(f"{line}\n" for line in dict.fromkeys(line for line, _, _ in LIMITS))
    found = rig_problems_of(tmp_path, edited(RIG, ("[simulation]", TABLE.format(lines))))
    assert [(problem.code, problem.key) for problem in found] == [("early-unused", "early.balance")]
    metered = SENSORS.replace("[simulation]", TABLE.format(lines))
    assert not rig_problems_of(tmp_path, edited(RIG, ("[simulation]", metered)))
