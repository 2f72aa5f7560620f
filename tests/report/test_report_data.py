"""A journal put together: points, rate constant, usage, phases; also torn, tripped, or without its files."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from fakes.report_run import FEED, TRUE_K, invented_recipe, invented_rig, true_conversion, write_run

from rigd.analysis.kinetics import Law
from rigd.model.errors import JournalError
from rigd.report.collect import read_run
from rigd.report.ending import UNFINISHED
from rigd.report.figures import thinned
from rigd.report.kinetic_fit import kinetics_of
from rigd.report.words import clock, duration, percent, points_words


@pytest.fixture(scope="module")
def run(tmp_path_factory):
    folder = write_run(tmp_path_factory.mktemp("runs") / "full")
    return read_run(folder, invented_rig(), invented_recipe())


def test_points_are_those_of_the_recipe_with_what_became_of_them(run):
    assert [point.id for point in run.points] == ["P1", "P2", "P3", "P4", "P5", "P6"]
    assert all(point.status == "collected" and point.settled and point.readings == 11 for point in run.points)
    first = run.points[0]
    assert first.flows_mL_min == {"PU-A": 2.0, "PU-B": 2.0}
    assert first.collected_mL == pytest.approx(4.0 * 40 / 60)
    assert first.collect_end_s - first.collect_start_s == pytest.approx(40, abs=1)


def test_conversion_is_the_mean_of_the_readings_and_its_scatter_the_noise(run):
    for point in run.points:
        assert point.conversion == pytest.approx(
            true_conversion(point.residence_time_s), abs=4 * 0.006 / math.sqrt(11) + 0.002
        )
        assert 0.001 < point.conversion_sd < 0.015


def test_the_rate_constant_behind_the_signals_comes_back(run):
    (fit,) = kinetics_of(run).fits
    assert fit.fit.law is Law.REVERSIBLE
    assert fit.feed == FEED
    assert abs(fit.fit.k - TRUE_K) < 4 * fit.fit.k_error
    assert fit.fit.k == pytest.approx(TRUE_K, rel=0.02)


def test_points_count_at_the_temperature_that_their_bed_had(run):
    """Cold beds at the fast points, by Arrhenius with the declared 58 kJ/mol: the constant at 60 degC still comes back.

    k(55)/k(60) = exp(-58000/8.314462618 (1/328.15 - 1/333.15)) = 0.7269 by hand.
    """
    beds = {"P1": 55.0, "P2": 57.0, "P3": 58.5}

    def seen(point):
        bed = beds.get(point.id, 60.0)
        slower = math.exp(-58000 / 8.314462618 * (1 / (bed + 273.15) - 1 / 333.15))
        return replace(point, bed_degC=bed, conversion=true_conversion(point.residence_time_s * slower))

    assert math.exp(-58000 / 8.314462618 * (1 / 328.15 - 1 / 333.15)) == pytest.approx(0.7269, abs=1e-4)
    (fit,) = kinetics_of(replace(run, points=tuple(seen(point) for point in run.points))).fits
    assert fit.fit.k == pytest.approx(TRUE_K, rel=1e-6)
    assert fit.activation_kJ_mol == 58.0
    assert fit.even[-1][1] == pytest.approx(fit.curve[-1][1])
    assert fit.even[10][1] > fit.curve[10][1]
    (plain,) = kinetics_of(run).fits
    assert plain.even == ()


def test_used_volumes_balance_with_what_the_pumps_delivered(run):
    """Everything drawn beyond the first fill was delivered: the sum over liquids against the pumps' counters."""
    delivered = sum(run.traces[f"PU-{letter}.delivered"].peak for letter in "AB")
    held = sum(run.traces[f"PU-{letter}.level"].value[-1] - 5.0 for letter in "AB")
    assert sum(run.used_mL.values()) == pytest.approx(delivered + held, abs=0.2)
    assert run.used_mL["feed-A"] == pytest.approx(run.used_mL["feed-B"])


def test_phases_follow_each_other_without_gap(run):
    assert [phase.id for phase in run.phases[:4]] == ["prime", "conditioning", "leak test", "switchover"]
    assert all(a.end_s == b.start_s for a, b in zip(run.phases, run.phases[1:], strict=False))
    assert run.phases[-1].end_s == run.duration_s


def test_a_run_without_its_files_still_makes_data(tmp_path):
    run = read_run(write_run(tmp_path / "bare"))
    assert run.rig is None
    assert run.title == "two-pumps"
    assert len(run.points) == 6
    assert run.used_mL == {}
    assert run.points[0].residence_time_s == pytest.approx(29.4, abs=0.5)
    assert not kinetics_of(run).fits


def test_a_journal_that_was_never_closed_says_so(tmp_path):
    write_run(tmp_path / "torn", close=False)
    import time

    for _ in range(100):
        run = read_run(tmp_path / "torn", invented_rig(), invented_recipe())
        if len(run.points) == 6:
            break
        time.sleep(0.1)
    assert run.outcome == UNFINISHED


def test_a_folder_without_a_journal_is_one_sentence(tmp_path):
    with pytest.raises(JournalError, match="there is no journal"):
        read_run(tmp_path)


def test_a_tripped_run_counts_its_points(tmp_path):
    run = read_run(write_run(tmp_path / "trip", trip_after=2), invented_rig(), invented_recipe())
    assert (run.outcome, points_words(run)) == ("tripped", "2 of 6 points collected")


def test_thinning_keeps_every_peak():
    t = np.arange(100_000.0)
    value = np.zeros(100_000)
    value[[5, 70_001, 99_998]] = 9.0, -4.0, 3.0
    value[40_000:45_000] = np.nan
    few_t, few = thinned(t, value, 500)
    assert len(few) <= 1000
    assert {9.0, -4.0, 3.0} <= set(few.tolist())
    assert np.isnan(few).any()
    assert (np.diff(few_t) > 0).all()


def test_words_for_numbers():
    assert (duration(math.nan), duration(59.6), duration(3600)) == ("–", "1 min 00 s", "1 h 00 min")
    assert (percent(math.nan), percent(0.5), percent(0.5, 0.012)) == ("–", "50.0", "50.0 ± 1.2")
    assert clock(86399) == "23:59:59"
