"""The report says with which calibrations a run was made, and which were overdue."""

from __future__ import annotations

import json
from dataclasses import replace
from pathlib import Path

import pytest
from fakes.report_run import invented_recipe, invented_rig, write_run

from rigd.report.calibrations import calibration_rows
from rigd.report.collect import read_run
from rigd.report.facts import report_facts
from rigd.report.page import render_page

STAMP = {"utc": "2026-01-02T00:00:00+00:00", "who": "B", "due_utc": "2026-07-01T00:00:00+00:00"}
FACTS = json.dumps([
    {**STAMP, "kind": "pump calibration", "subject": "PU-A", "values": {"factor": 1.02, "factor_expanded": 0.002},
     "overdue": True},
    {**STAMP, "kind": "sensor calibration", "subject": "PT-1", "values": {"zero": 0.05, "gain": 0.99},
     "overdue": False},
    {**STAMP, "kind": "segment by tracer", "subject": "L-1+COL", "values": {"volume_mL": 2.1, "peclet": 40.0},
     "overdue": False},
])  # fmt: skip


def test_they_stand_in_the_page_and_in_json(tmp_path: Path) -> None:
    run = read_run(write_run(tmp_path / "run"), invented_rig(), invented_recipe())
    assert "<h2>Calibrations</h2>" not in render_page(run)
    made_with = replace(run, facts={**run.facts, "calibrations": FACTS})
    page = render_page(made_with)
    for told in ("<h2>Calibrations</h2>", "delivers 1.0200 ± 0.0020", "<strong>overdue</strong>", "2.1 mL by tracer"):
        assert told in page
    rows = report_facts(made_with)["calibrations"]
    assert isinstance(rows, list)
    assert [(row["part"], row["overdue"]) for row in rows] == [("PU-A", True), ("PT-1", False), ("L-1+COL", False)]


@pytest.mark.parametrize("text", ["", "[]", "rubbish", "[1]", '[{"kind": "pump calibration"}]'])
def test_a_run_without_them_or_with_a_spoilt_fact_has_none(text: str) -> None:
    assert calibration_rows({"calibrations": text}) == ()
    assert calibration_rows({}) == ()
