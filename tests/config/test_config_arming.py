"""What an unattended run needs: each requirement alone, and the numbers at their edges."""

from __future__ import annotations

from dataclasses import replace
from datetime import UTC, datetime, timedelta

import pytest
from fakes.config_files import CONFIGS

from rigd.config import load_pair
from rigd.config.arming import Arming, arming, as_problem
from rigd.model.recipe import Recipe
from rigd.model.records import RecordKind, RigRecord
from rigd.model.rig import AlertChannel, Outside, RigDefinition

NOW = datetime(2026, 5, 1, 18, 0, tzinfo=UTC)
PAIR = load_pair(CONFIGS / "rigs/two-pump-column.toml", CONFIGS / "recipes/overnight-sweep.toml")
RIG = replace(PAIR.rig, outside=Outside(None, (AlertChannel("phone", "json://x"), AlertChannel("log", "json://y", 1))))
LOCKS = ("PRESSURE-HIGH", "BED-HOT", "JACKET-ADRIFT")


def entry(kind: RecordKind, subject: str, age: timedelta, passed: bool = True) -> RigRecord:
    return RigRecord(kind, subject, (NOW - age).isoformat(), "ann", passed)


GOOD = [
    *(entry(RecordKind.PROOF, lock, timedelta(days=10)) for lock in LOCKS),
    entry(RecordKind.ALERT_RECEIVED, "phone", timedelta(hours=1)),
]


def judged(recipe: Recipe | None = None, records: list[RigRecord] | None = None, **more) -> Arming:
    rig: RigDefinition = more.pop("rig", RIG)
    given = {"duration_s": 8 * 3600.0, "simulated": False, **more}
    return arming(rig, recipe or PAIR.recipe, GOOD if records is None else records, NOW, **given)


def missing(found: Arming) -> list[str]:
    return [one.id for one in found.missing]


def test_everything_is_there() -> None:
    found = judged()
    assert (found.armed, found.refusal, found.overdue) == (True, "", ())
    assert [one.id for one in found.requirements] == ["sheet", "approval", "contacts", "end", "proof", "alert"]


def test_no_sheet_and_reagent() -> None:
    assert missing(judged(replace(PAIR.recipe, sheet=None))) == ["sheet"]
    assert judged(replace(PAIR.recipe, sheet=None, switchover=None)).armed  # solvent only


def test_no_permit() -> None:
    assert missing(judged(replace(PAIR.recipe, permit=None))) == ["approval", "contacts", "end"]


def test_two_contacts_are_two_people() -> None:
    twice = replace(PAIR.recipe.permit, contacts=("Ann, 123", " ann, 123 "))
    assert missing(judged(replace(PAIR.recipe, permit=twice))) == ["contacts"]


@pytest.mark.parametrize(("hours", "ids"), [(8.0, []), (7.99, ["end"]), (-1.0, ["end"])])
def test_the_permit_outlasts_the_run(hours: float, ids: list[str]) -> None:
    end = (NOW + timedelta(hours=hours)).isoformat().replace("+00:00", "Z")
    found = judged(replace(PAIR.recipe, permit=replace(PAIR.recipe.permit, end_utc=end)))
    assert missing(found) == ids
    assert found.left_s == pytest.approx(hours * 3600)


@pytest.mark.parametrize(
    ("more", "overdue"),
    [
        ([entry(RecordKind.PROOF, "BED-HOT", timedelta(days=90))], ()),
        ([entry(RecordKind.PROOF, "BED-HOT", timedelta(days=90, seconds=1))], ("BED-HOT",)),
        ([entry(RecordKind.PROOF, "BED-HOT", timedelta(days=1), passed=False)], ("BED-HOT",)),
        ([entry(RecordKind.PROOF, "BED-HOT", timedelta(days=-1))], ("BED-HOT",)),  # the clock was set back
    ],
)
def test_proof_tests_have_a_date(more: list[RigRecord], overdue: tuple[str, ...]) -> None:
    found = judged(records=[*GOOD, *more])
    assert found.overdue == overdue
    assert missing(found) == (["proof"] if overdue else [])


def test_an_interlock_never_tested_is_overdue_and_one_that_needs_no_test_is_not() -> None:
    assert judged(records=[GOOD[-1]]).overdue == LOCKS
    locks = tuple(replace(lock, proof_interval_s=0.0) for lock in RIG.interlocks)
    assert judged(records=[GOOD[-1]], rig=replace(RIG, interlocks=locks)).overdue == ()


@pytest.mark.parametrize(
    ("subject", "hours", "ids"),
    [("phone", 12.0, []), ("phone", 12.1, ["alert"]), ("log", 1.0, ["alert"]), ("gone", 1.0, ["alert"])],
)
def test_somebody_was_reached_over_a_channel_that_wakes(subject: str, hours: float, ids: list[str]) -> None:
    records = [*GOOD[:-1], entry(RecordKind.ALERT_RECEIVED, subject, timedelta(hours=hours))]
    assert missing(judged(records=records)) == ids
    sent = [*GOOD[:-1], entry(RecordKind.ALERT_SENT, "phone", timedelta(hours=1))]
    assert missing(judged(records=sent)) == ["alert"]


def test_no_channel() -> None:
    assert missing(judged(rig=PAIR.rig)) == ["alert"]


def test_a_simulated_rig_is_asked_for_papers_only() -> None:
    assert judged(records=[], rig=PAIR.rig, simulated=True).armed
    assert missing(judged(replace(PAIR.recipe, permit=None), [], simulated=True)) == ["approval", "contacts", "end"]


def test_what_is_missing_is_said_with_what_to_do() -> None:
    found = judged(records=GOOD[1:])
    assert found.refusal == (
        "proof tests: overdue: PRESSURE-HIGH, so test each with a real stimulus and record it with: "
        "rigd proof RIG INTERLOCK"
    )
    assert as_problem(found.missing[0]).code == "not-armed"
