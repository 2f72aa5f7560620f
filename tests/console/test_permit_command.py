"""``rigd permit``, ``rigd proof``, ``rigd alert-test``, and the refusal of an unattended run that is not armed."""

from __future__ import annotations

import json
from pathlib import Path

import pytest
from fakes.config_files import CONFIGS, RIG, edited, write
from fakes.web_hook import web_hook

from rigd.adapters.rig_records import read_records
from rigd.app import RunSettings, prepare_run
from rigd.config import load_pair
from rigd.console.cli import call
from rigd.model.errors import ConfigError
from rigd.report.papers import door_sign, page, shutdown_card
from rigd.runtime.arming import is_simulated

OVERNIGHT = (CONFIGS / "recipes/overnight-sweep.toml").read_text(encoding="utf-8")
REAL = RIG.replace('port = "simulated"', 'port = "/dev/none"', 1)
"""One link has a real port, so that nothing is waived."""


def test_the_example_may_run_unattended_in_the_simulator(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    rig, recipe = write(tmp_path, recipe=OVERNIGHT)
    assert call(["permit", str(rig), str(recipe), "--out", str(tmp_path / "papers"), "--json"]) == 0
    facts = json.loads(capsys.readouterr().out)
    assert facts["armed"]
    assert {one["id"]: one["met"] for one in facts["requirements"]}["proof"] is False
    sign = (tmp_path / "papers/door-sign.html").read_text(encoding="utf-8")
    for told in ("UNATTENDED EXPERIMENT", "SIMULATED", "first contact, phone", "second contact, phone", "ethanol"):
        assert told in sign
    card = (tmp_path / "papers/shutdown-card.html").read_text(encoding="utf-8")
    assert card.count("<li>") == 3
    assert "hard-wired emergency stop" in card


def test_what_is_missing_is_shown(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    rig, recipe = write(tmp_path, rig=REAL, recipe=OVERNIGHT)
    assert call(["permit", str(rig), str(recipe)]) == 1
    told = capsys.readouterr().out
    assert "may not run unattended" in told
    assert "[[outside.alerts]]" in told


def test_an_unattended_run_without_a_permit_or_proof_tests_is_refused_before_anything_is_opened(tmp_path: Path) -> None:
    settings = RunSettings(unattended=True, runs=tmp_path / "runs")
    for rig_text, recipe_text, words in ((RIG, None, "no [permit]"), (REAL, OVERNIGHT, "overdue: PRESSURE-HIGH")):
        rig, recipe = write(tmp_path, rig_text, *([recipe_text] if recipe_text else []))
        with pytest.raises(ConfigError) as refused:
            prepare_run(rig, recipe, settings)
        assert words in str(refused.value)
        assert {problem.code for problem in refused.value.problems} == {"not-armed"}
    assert not (tmp_path / "runs").exists()


def test_an_unattended_rehearsal_says_what_a_real_rig_would_be_refused_for(
    tmp_path: Path, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setenv("RIGD_RUNTIME", str(tmp_path / "rt"))
    rig, recipe = write(tmp_path, recipe=OVERNIGHT)
    assert call(["run", str(rig), str(recipe), "--unattended", "--runs", str(tmp_path / "runs")]) == 1
    told = capsys.readouterr().err
    assert "proof tests: overdue: PRESSURE-HIGH" in told
    assert "not being served" in told.replace("\n", " ")  # no simulator runs here


def test_proof_tests_are_recorded_and_listed(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    rig, _ = write(tmp_path)
    assert call(["proof", str(rig)]) == 1
    assert "never tested" in capsys.readouterr().out
    done = ["--as", "ann", "--as-found", "8.1 bar by hand pump: stopped after 0.4 s", "--as-left", "vented"]
    for lock in ("PRESSURE-HIGH", "BED-HOT", "JACKET-ADRIFT"):
        assert call(["proof", str(rig), lock, *done]) == 0
    assert call(["proof", str(rig)]) == 0
    assert call(["proof", str(rig), "BED-HOT", *done, "--failed"]) == 0
    capsys.readouterr()
    assert call(["proof", str(rig), "--json"]) == 1
    facts = json.loads(capsys.readouterr().out)
    assert facts["overdue"] == ["BED-HOT"]
    assert facts["last"]["BED-HOT"]["passed"] is False
    assert len(read_records(rig)) == 4


@pytest.mark.parametrize(
    "arguments", [["NONSENSE", "--as-found", "x", "--as-left", "y"], ["LINK-pump-a"], ["BED-HOT", "--as-found", "x"]]
)
def test_a_proof_test_of_nothing_or_without_findings_is_not_recorded(tmp_path: Path, arguments: list[str]) -> None:
    rig, _ = write(tmp_path)
    assert call(["proof", str(rig), *arguments]) == 2
    assert read_records(rig) == ()


def test_a_test_alert_is_sent_read_and_recorded(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    with web_hook() as hook:
        url = f"json://127.0.0.1:{hook.port}/"
        rig, _ = write(tmp_path, RIG + f'\n[[outside.alerts]]\nname = "phone"\nurl = "{url}"\n')
        assert call(["alert-test", str(rig)]) == 0
        code = json.dumps(hook.posts[-1]).rpartition("code: ")[2][:4]
    assert code.isdigit()
    assert call(["alert-test", str(rig), "--received", "nonsense", "--as", "ann"]) == 2
    assert call(["alert-test", str(rig), "--received", code]) == 2
    assert call(["alert-test", str(rig), "--received", code, "--as", "ann"]) == 0
    assert [record.kind.value for record in read_records(rig)] == ["alert sent", "alert received"]


def test_no_alert_channel_to_test(tmp_path: Path) -> None:
    rig, _ = write(tmp_path)
    assert call(["alert-test", str(rig)]) == 2


def test_papers_of_a_chemistry_that_must_not_stand_still(tmp_path: Path) -> None:
    recipe_text = edited(OVERNIGHT, ("stagnation_safe = true", "stagnation_safe = false"))
    recipe_text = edited(recipe_text, ("gas_evolution = false", "gas_evolution = true"))
    steps = 'shutdown = ["Turn the red switch <A>.", "Call."]\nplace ='
    pair = load_pair(*write(tmp_path, recipe=edited(recipe_text, ("place =", steps))))
    assert pair.recipe is not None
    simulated = is_simulated(pair.rig)
    sign, card = (make(pair.rig, pair.recipe, simulated=simulated) for make in (door_sign, shutdown_card))
    assert "the mixture is NOT safe when it stands still in the bed" in dict(sign.parts)["Hazards"]
    assert "gas is evolved" in dict(sign.parts)["Hazards"]
    assert card.steps == ("Turn the red switch <A>.", "Call.")
    assert "&lt;A&gt;" in page(card)
    assert any("call at once" in line for line in dict(card.parts)["Do not"])
