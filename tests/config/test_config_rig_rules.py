"""Interlocks and alarms of a rig file: one thing is wrong, and exactly that is said, at its key and line.

A row fails when its check is removed (nothing is said) and when another check speaks out of turn (more is said).
"""

from __future__ import annotations

from pathlib import Path

import pytest
from fakes.config_files import Row, within, without

LEAK_SENSOR = """[[sensors]]
tag = "LD-1"
title = "leak tray"
measures = "state"
at = "COL"
labels = ["dry", "wet"]
device = "sensors"
channel = "d1"

"""
ROWS = (
    Row("tag-unknown", "interlocks[BED-HOT].trip_when[1].tag", "TT-9", within("BED-HOT", '"TT-1"', '"TT-9"')),
    Row(
        "tag-unknown",
        "interlocks[JACKET-ADRIFT].trip_when[1].differs_from",
        "CH.set",
        within("JACKET-ADRIFT", "CH.setpoint", "CH.set"),
    ),
    Row("unit-wrong", "interlocks[BED-HOT].trip_when[1].above", '"75 bar"', within("BED-HOT", '"75 degC"', '"75 bar"')),
    Row(
        "unit-wrong",
        "interlocks[JACKET-ADRIFT].trip_when[1].by",
        '"6 degC"',
        within("JACKET-ADRIFT", '"6 K"', '"6 degC"'),
    ),
    Row(
        "unit-wrong",
        "interlocks[JACKET-ADRIFT].trip_when[1].differs_from",
        "PT-1",
        within("JACKET-ADRIFT", "CH.setpoint", "PT-1"),
    ),
    Row(
        "unit-wrong",
        "alarms[PRESSURE-RISING].when.deadband",
        '"0.4 K"',
        within("PRESSURE-RISING", '"0.4 bar"', '"0.4 K"'),
    ),
    Row(
        "value-out-of-range",
        "interlocks[JACKET-ADRIFT].trip_when[1].by",
        '"-6 K"',
        within("JACKET-ADRIFT", '"6 K"', '"-6 K"'),
    ),
    Row(
        "comparison-wrong",
        "alarms[FLASK-NEARLY-FULL].when.above",
        "V-C.position",
        within("FLASK-NEARLY-FULL", '"flask.volume"', '"V-C.position"'),
    ),
    Row(
        "comparison-wrong",
        "interlocks[BED-HOT].trip_when[1].equals",
        "equals",
        within("BED-HOT", 'above = "75 degC"', "equals = 1"),
    ),
    Row(
        "comparison-wrong",
        "alarms[PRESSURE-RISING].when.rate_above",
        "PU-A.flow",
        within(
            "PRESSURE-RISING", '"PT-1", above = "6.5 bar", deadband = "0.4 bar"', '"PU-A.flow", rate_above = "1 mL/min"'
        ),
    ),
    Row(
        "state-unknown",
        "interlocks[BED-HOT].trip_when[1].equals",
        '"moist"',
        within("BED-HOT", '"TT-1", above = "75 degC"', '"LD-1", equals = "moist"'),
        LEAK_SENSOR,
    ),
    Row(
        "state-unknown",
        "interlocks[BED-HOT].trip_when[1].equals",
        "equals = 2",
        within("BED-HOT", '"TT-1", above = "75 degC"', '"LD-1", equals = 2'),
        LEAK_SENSOR,
    ),
    Row(
        "window-short",
        "interlocks[BED-HOT].trip_when[1].window",
        "window",
        within("BED-HOT", 'above = "75 degC"', 'rate_above = "5 K/min", window = "3 s"'),
    ),
    Row(
        "startup-on-limit",
        "interlocks[BED-HOT].startup",
        "startup",
        within("BED-HOT", 'delay = "2 s"', 'delay = "2 s"\nstartup = "5 s"'),
    ),
    Row(
        "comparison-wrong",
        "interlocks[BED-HOT].disagree_by",
        "disagree_by",
        within("BED-HOT", 'delay = "2 s"', 'delay = "2 s"\ndisagree_by = "5 K"'),
    ),
    Row(
        "unit-wrong",
        "interlocks[PRESSURE-HIGH].disagree_by",
        "disagree_by",
        within("PRESSURE-HIGH", 'delay = "200 ms"', 'delay = "200 ms"\ndisagree_by = "1 K"'),
    ),
    Row(
        "comparison-wrong",
        "interlocks[JACKET-ADRIFT].trip_when[1].disagrees_with",
        "TT-2",
        within("JACKET-ADRIFT", 'differs_from = "CH.setpoint"', 'disagrees_with = "TT-2"'),
        also=("settling-unused",),
    ),
    Row(
        "comparison-wrong",
        "alarms[PRESSURE-RISING].when.mismatch_by",
        "mismatch_by",
        within("PRESSURE-RISING", 'above = "6.5 bar", deadband = "0.4 bar"', 'mismatch_by = "1 bar"'),
    ),
    Row(
        "urgency-missing",
        "alarms[FLASK-NEARLY-FULL]",
        "[[alarms]]",
        within("FLASK-NEARLY-FULL", 'priority = "medium"\n', ""),
    ),
    Row(
        "urgency-missing",
        "alarms[FLASK-NEARLY-FULL]",
        "[[alarms]]",
        within("FLASK-NEARLY-FULL", 'priority = "medium"', 'leads_to = "trip"'),
    ),
    Row(
        "priority-unlike",
        "alarms[FLASK-NEARLY-FULL].priority",
        "priority",
        within("FLASK-NEARLY-FULL", 'priority = "medium"', 'priority = "medium"\nleads_to = "maintenance"'),
        warning=True,
    ),
    Row(
        "alarm-too-short",
        "alarms[FLASK-NEARLY-FULL].respond_within",
        "respond_within",
        within("FLASK-NEARLY-FULL", 'priority = "medium"', 'leads_to = "trip"\nrespond_within = "29 min"'),
        warning=True,
    ),
    Row("vote-impossible", "interlocks[PRESSURE-HIGH].vote", "3oo2", within("PRESSURE-HIGH", "1oo2", "3oo2")),
    Row("vote-impossible", "interlocks[PRESSURE-HIGH].vote", "2oo3", within("PRESSURE-HIGH", "1oo2", "2oo3")),
    Row("vote-all", "interlocks[PRESSURE-HIGH].vote", "2oo2", within("PRESSURE-HIGH", "1oo2", "2oo2")),
    Row(
        "no-protection",
        "interlocks[BED-HOT].on_bad",
        "on_bad",
        within("BED-HOT", 'on_bad = "trip"', 'on_bad = "ignore"'),
    ),
    Row(
        "settling-unused",
        "interlocks[BED-HOT].settling",
        "settling",
        within("BED-HOT", 'delay = "2 s"', 'delay = "2 s"\nsettling = "5 s"'),
    ),
    Row(
        "limit-outside-span",
        "interlocks[BED-HOT].trip_when[1].above",
        "175 degC",
        within("BED-HOT", "75 degC", "175 degC"),
    ),
    Row(
        "limit-outside-span",
        "interlocks[BED-HOT].trip_when[1].above",
        "-75 degC",
        within("BED-HOT", "75 degC", "-75 degC"),
    ),
    Row(
        "limit-outside-span",
        "interlocks[BED-HOT].trip_when[1].below",
        "-75 degC",
        within("BED-HOT", 'above = "75 degC"', 'below = "-75 degC"'),
    ),
    Row(
        "limit-outside-span",
        "alarms[PRESSURE-RISING].when.below",
        "30 bar",
        within("PRESSURE-RISING", 'above = "6.5 bar"', 'below = "30 bar"'),
    ),
    Row(
        "limit-above-rating",
        "interlocks[PRESSURE-HIGH].trip_when[2].above",
        "20 bar",
        within("PRESSURE-HIGH", '"PT-2", above = "8 bar"', '"PT-2", above = "20 bar"'),
    ),
    Row(
        "limit-above-rating",
        "alarms[PRESSURE-RISING].when.above",
        "21 bar",
        within("PRESSURE-RISING", "6.5 bar", "21 bar"),
    ),
    Row(
        "limit-above-capacity",
        "alarms[FLASK-NEARLY-FULL].when.above",
        "250 mL",
        within("FLASK-NEARLY-FULL", "225 mL", "250 mL"),
    ),
    Row(
        "psi-as-bar",
        "alarms[PRESSURE-RISING].when.above",
        "290 bar",
        within("PRESSURE-RISING", "6.5 bar", "290 bar"),
        "",
        ("limit-above-rating", "limit-outside-span"),
        True,
    ),
    Row(
        "psi-as-bar",
        "alarms[PRESSURE-RISING].when.above",
        "1.37 bar",
        within("PRESSURE-RISING", "6.5 bar", "1.37 bar"),
        "",
        (),
        True,
    ),
    Row(
        "pressure-not-cut",
        "interlocks[PRESSURE-HIGH].stop",
        "quench",
        within("PRESSURE-HIGH", 'stop = "cut"', 'stop = "quench"'),
        "",
        ("rating-unprotected",),
    ),
    Row(
        "limit-not-armed",
        "interlocks[PRESSURE-HIGH].armed",
        "armed",
        within("PRESSURE-HIGH", 'stop = "cut"', 'stop = "cut"\narmed = "running"'),
    ),
    Row("rating-unprotected", "pumps[PU-A].rating", 'rating = "20 bar"', without("PRESSURE-HIGH"), "", (), True),
)


@pytest.mark.parametrize("row", ROWS, ids=lambda row: f"{row.code}-{row.key}")
def test_exactly_this_is_said(row: Row, tmp_path: Path) -> None:
    row.check(tmp_path)
