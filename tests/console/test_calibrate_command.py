"""``rigd calibrate``: what a person typed becomes a record beside the rig file, and is told by check."""

from __future__ import annotations

import json
import math
from datetime import UTC, datetime, timedelta
from pathlib import Path

import pytest
from fakes.config_files import RIG, edited, write

from rigd.adapters.rig_records import append_record, read_records
from rigd.app import RunSettings, prepare_run
from rigd.config import load_rig
from rigd.config.calibrating import corrections, in_force, overdue
from rigd.console.cli import call
from rigd.model.errors import JournalError
from rigd.model.records import RecordKind, RigRecord

WATER = edited(RIG, ('name = "ethanol"\nrole = "solvent"\nproperties = "ethanol"',
                     'name = "water"\nrole = "solvent"\nproperties = "water"'))  # fmt: skip


def told(capsys: pytest.CaptureFixture[str], *words: str | Path) -> tuple[int, dict[str, object]]:
    code = call([*map(str, words), "--json"])
    return code, json.loads(capsys.readouterr().out or "{}")


def test_a_pump_is_weighed_and_its_factor_recorded(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """2 mL ordered, water at 20 degC, 1.9942 g on the balance: Z = 1.0029 mL/g (ISO 8655-6), so 2.0000 mL came."""
    rig, _ = write(tmp_path, WATER)
    masses = [word for mass in (1.9940, 1.9942, 1.9944) for word in ("--mass", f"{mass} g")]
    code, facts = told(
        capsys, "calibrate", "pump", rig, "PU-A", "--ordered", "2 mL", *masses, "--at", "20 degC", "--as", "B"
    )
    assert code == 0
    recorded = facts["recorded"]
    assert isinstance(recorded, dict)
    assert recorded["values"]["factor"] == pytest.approx(1.0, abs=1e-4)
    assert 0 < recorded["values"]["factor_expanded"] < 1e-3
    (record,) = read_records(rig)
    assert (record.kind, record.subject, record.who) == (RecordKind.PUMP, "PU-A", "B")
    assert "Tanaka" in record.as_left


def test_a_second_calibration_builds_on_the_one_in_force(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    rig, _ = write(tmp_path)
    weigh = ("calibrate", "pump", rig, "PU-A", "--ordered", "2 mL", "--density", "0.8 g/mL")
    heavy = [word for _ in range(3) for word in ("--mass", "1.632 g")]  # 2 % more, leaving the buoyancy of air out
    right = [word for _ in range(3) for word in ("--mass", "1.600 g")]
    factors = []
    for more in (heavy, right, [*right, "--raw"]):
        assert call([*map(str, weigh), *more]) == 0
        factors.append(corrections(in_force(load_rig(rig), read_records(rig))).pumps["PU-A"])
    assert factors[0] == pytest.approx(1.02, abs=2e-3)
    assert factors[1] == pytest.approx(factors[0], rel=2e-3)  # as corrected, it gave what was ordered
    assert factors[2] == pytest.approx(1.0, abs=2e-3)
    capsys.readouterr()


def test_weighings_are_asked_for_one_after_the_other(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    rig, _ = write(tmp_path)
    answers = iter(["1.600 g", "1,6", "1.604 g", "1.596 g", ""])
    monkeypatch.setattr("click.prompt", lambda text, **more: next(answers))
    assert call(["calibrate", "pump", str(rig), "PU-A", "--ordered", "2 mL", "--density", "0.8 g/mL"]) == 0
    told = capsys.readouterr().err
    assert "mean 1.6 g, scatter 0.25%" in " ".join(told.split())
    assert "'1,6'" in told
    (record,) = read_records(rig)
    assert json.loads(record.detail)["values"]["repeats"] == 3


def test_a_sensor_at_two_points_and_then_its_zero_alone(tmp_path: Path) -> None:
    rig, _ = write(tmp_path)

    def now() -> tuple[float, float]:
        return corrections(in_force(load_rig(rig), read_records(rig))).sensors["PT-1"]

    sensor = ["calibrate", "sensor", str(rig), "PT-1"]
    assert call([*sensor, "--zero", "0 bar", "30 mbar", "--span", "10 bar", "10.23 bar"]) == 0
    zero, gain = now()
    assert (zero, gain) == (pytest.approx(0.03), pytest.approx(10 / 10.2))
    assert call([*sensor, "--zero", "0 bar", "0.05 bar"]) == 0  # rigd showed 0.05: it has drifted by 0.05 / gain
    assert now() == (pytest.approx(0.03 + 0.05 / gain), pytest.approx(gain))
    assert call([*sensor, "--zero", "0 bar", "0.01 bar", "--raw"]) == 0
    assert now() == (pytest.approx(0.01), pytest.approx(gain))


def test_a_segment_by_tracer_is_told_beside_the_rig_file(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """A curve of five tanks with 60 s mean at 1 mL/min is 1 mL, whatever is drawn."""
    rig, _ = write(tmp_path)
    lines = ["t_s,signal", *(f"{t},{t**4 * math.exp(-t / 12)}" for t in range(400))]
    (tmp_path / "curve.csv").write_text("\n".join(lines) + "\n")
    code, facts = told(capsys, "calibrate", "tracer", rig, "L-1+COL", tmp_path / "curve.csv", "--flow", "1 mL/min")
    assert code == 0
    values = facts["recorded"]["values"]  # type: ignore[index,call-overload]
    assert values["volume_mL"] == pytest.approx(1.0, rel=2e-3)
    assert values["tanks"] == pytest.approx(5, rel=1e-2)
    assert values["drawn_mL"] == pytest.approx(
        math.pi / 4 * (0.05**2 * 30 + 0.66**2 * 10 * (0.38 + 0.62 * 0.31)), rel=1e-6
    )


@pytest.mark.parametrize(
    ("words", "said"),
    [
        (("pump", "PU-X", "--ordered", "2 mL", "--mass", "1 g"), "it has PU-A, PU-B"),
        (("pump", "PU-A", "--ordered", "2 mL", "--mass", "1.6 g"), "too few"),
        (("pump", "PU-A", "--ordered", "2", "--mass", "1.6 g"), "no unit"),
        (("pump", "PU-A", "--ordered", "2 mL", *(["--mass", "3 g"] * 3)), "look at units"),
        (("pump", "PU-A", "--ordered", "2 mL", *(["--mass", "1.6 g"] * 3), "--liquid", "acid-feed"), "--density"),
        (("sensor", "PT-1", "--zero", "0 bar", "9 bar"), "look at the sensor"),
        (("sensor", "PT-1", "--zero", "0 bar", "0 bar", "--span", "1 bar", "1 bar"), "too near"),
        (("sensor", "PU-A.flow", "--zero", "0 bar", "0 bar"), "to be calibrated so"),
        (("tracer", "NOWHERE", "curve.csv", "--flow", "1 mL/min"), "no part 'NOWHERE'"),
        (("tracer", "COL", "nothing.csv", "--flow", "1 mL/min"), "cannot be read"),
    ],
)  # fmt: skip
def test_what_cannot_be_is_refused_in_a_sentence(
    tmp_path: Path, capsys: pytest.CaptureFixture[str], words: tuple[str, ...], said: str
) -> None:
    rig, _ = write(tmp_path)
    assert call(["calibrate", words[0], str(rig), *words[1:]]) == 2
    error = " ".join(capsys.readouterr().err.split())
    assert said in error
    assert read_records(rig) == ()


def test_overdue_is_told_and_stays_in_force(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    rig, recipe = write(tmp_path)
    pump = ("calibrate", "pump", rig, "PU-A", "--ordered", "2 mL", "--density", "0.8 g/mL", *(["--mass", "1.6 g"] * 3))
    assert call([*map(str, pump), "--valid", "1 s"]) == 0
    found = in_force(load_rig(rig), read_records(rig))
    assert overdue(found, datetime.now(UTC) + timedelta(minutes=1)) == found
    assert "PU-A" in corrections(found).pumps
    capsys.readouterr()
    append_record(rig, _due_in_the_past(rig))
    assert call(["calibrate", "list", str(rig)]) == 1
    assert "overdue" in capsys.readouterr().out
    code, facts = told(capsys, "check", rig, recipe)
    assert code == 1
    codes = {one["code"] for one in facts["problems"]}  # type: ignore[attr-defined]
    assert {"calibration-overdue", "calibrated-rate"} <= codes  # it gives less, and a planned flow is out of its reach
    (one,) = facts["calibrations"]  # type: ignore[misc]
    assert one["overdue"] is True


def _due_in_the_past(rig: Path) -> RigRecord:
    (record,) = read_records(rig)
    return RigRecord(record.kind, record.subject, "2020-01-01T00:00:00+00:00", "B", True, "", "", json.dumps(
        {"due_utc": "2020-07-01T00:00:00+00:00", "values": {"factor": 0.3}}))  # fmt: skip


def test_a_record_without_numbers_is_said(tmp_path: Path) -> None:
    rig, _ = write(tmp_path)
    append_record(rig, RigRecord(RecordKind.PUMP, "PU-A", "2026-01-01T00:00:00+00:00", "B", detail="about right"))
    with pytest.raises(JournalError, match="pump calibration PU-A cannot be read"):
        in_force(load_rig(rig), read_records(rig))


def test_the_plan_of_a_run_carries_what_is_in_force(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    rig, recipe = write(tmp_path)
    detail = json.dumps({"due_utc": "2999-01-01T00:00:00+00:00", "values": {"factor": 1.02}})
    append_record(rig, RigRecord(RecordKind.PUMP, "PU-A", "2026-01-01T00:00:00+00:00", "B", detail=detail))
    monkeypatch.setattr("rigd.app.resolve_ports", lambda definition, path, pace: definition.links)
    monkeypatch.setattr("rigd.app.lock_ports", lambda ports, **facts: [])
    plan = json.loads(prepare_run(rig, recipe, RunSettings(runs=tmp_path / "runs")).read_text())
    (one,) = plan["calibrations"]
    assert (one["subject"], one["values"], one["overdue"]) == ("PU-A", {"factor": 1.02}, False)
