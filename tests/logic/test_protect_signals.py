"""Judging of samples: span, age, links and numbers, one sample at a time."""

from __future__ import annotations

import csv
import math
from pathlib import Path

import pytest
from fakes.rigs import MS, S, program_of

from rigd.logic.program import Program
from rigd.logic.protect import signals
from rigd.logic.protect.signals import RING, Signals
from rigd.model.devices import DeviceStatus, LinkState
from rigd.model.samples import Quality, QualityCause, Sample

REFERENCE = Path(__file__).parents[1] / "reference" / "ne43.csv"


@pytest.fixture(name="program", scope="module")
def _program() -> Program:
    return program_of()


def judged(program: Program, sample: Sample, now_ns: int = 0, before: Signals | None = None) -> Sample:
    after, _ = signals.take(program, before or signals.initial(0), (sample,), now_ns)
    return after.samples[sample.tag]


@pytest.mark.parametrize(
    ("current_mA", "quality"),
    [  # NAMUR NE 43 as public summaries give it: failure at 3.6 and 21.0 mA, good from 3.8 to 20.5 mA
        (3.6, Quality.BAD),
        (3.61, Quality.UNCERTAIN),
        (3.79, Quality.UNCERTAIN),
        (3.8, Quality.GOOD),
        (4.0, Quality.GOOD),
        (20.0, Quality.GOOD),
        (20.5, Quality.GOOD),
        (20.6, Quality.UNCERTAIN),
        (21.0, Quality.BAD),
    ],
)
def test_span_of_a_measured_tag_follows_ne_43(program: Program, current_mA: float, quality: Quality) -> None:
    value = round((current_mA - 4.0) / 16.0 * 25.0, 9)  # PT-1 spans 0 to 25 bar
    found = judged(program, Sample("PT-1", value, 0))
    assert found.quality is quality
    assert found.value == value


def test_the_reference_rows_of_ne_43(program: Program) -> None:
    rows = csv.DictReader(line for line in REFERENCE.read_text().splitlines() if not line.startswith("#"))
    for row in rows:
        value = round(float(row["0-16bar"]) / 16.0 * 25.0, 9)
        assert judged(program, Sample("PT-1", value, 0)).quality.name.lower() == row["quality"]


def test_the_end_of_the_span_is_uncertain_for_a_second_and_then_bad(program: Program) -> None:
    state = signals.initial(0)
    for t_ns in range(0, 2 * S, 200 * MS):
        state, _ = signals.take(program, state, (Sample("PT-1", -0.4, t_ns),), t_ns)
        state, _ = signals.grow_old(program, state, t_ns)
        assert state.samples["PT-1"].quality is (Quality.UNCERTAIN if t_ns < S else Quality.BAD)
    state, _ = signals.take(program, state, (Sample("PT-1", 0.4, 2 * S),), 2 * S)
    assert state.samples["PT-1"].quality is Quality.GOOD
    assert not state.marginal


def test_the_end_of_the_span_turns_bad_without_a_new_sample(program: Program) -> None:
    state, _ = signals.take(program, signals.initial(0), (Sample("TT-1", -54.0, 0),), 0)
    assert state.due_ns <= S
    state, aged = signals.grow_old(program, state, S)
    assert aged["TT-1"].quality is Quality.BAD


@pytest.mark.parametrize("value", [math.nan, math.inf, -math.inf])
@pytest.mark.parametrize("tag", ["PT-1", "PU-A.flow"])
def test_what_is_not_a_number_is_bad(program: Program, value: float, tag: str) -> None:
    found = judged(program, Sample(tag, value, 0))
    assert (found.quality, found.cause) == (Quality.BAD, QualityCause.NOT_A_NUMBER)


def test_what_the_driver_says_is_kept(program: Program) -> None:
    found = judged(program, Sample("PT-1", 1.0, 0, Quality.BAD, QualityCause.SENSOR_FAULT))
    assert (found.quality, found.cause) == (Quality.BAD, QualityCause.SENSOR_FAULT)
    found = judged(program, Sample("PT-1", 1.0, 0, Quality.UNCERTAIN, QualityCause.FROZEN))
    assert (found.quality, found.cause) == (Quality.UNCERTAIN, QualityCause.FROZEN)


def test_a_substituted_value_is_bad(program: Program) -> None:
    found = judged(program, Sample("PT-1", 1.0, 0, Quality.GOOD, QualityCause.SUBSTITUTED))
    assert (found.quality, found.cause) == (Quality.BAD, QualityCause.SUBSTITUTED)


def test_late_foreign_and_future_samples(program: Program) -> None:
    state, _ = signals.take(program, signals.initial(0), (Sample("PT-1", 1.0, S),), S)
    state, taken = signals.take(program, state, (Sample("PT-1", 2.0, S - 1), Sample("NONE", 1.0, S)), S)
    assert taken == {}
    assert state.samples["PT-1"].value == 1.0
    assert judged(program, Sample("PT-1", 1.0, 5 * S), now_ns=S).t_ns == S


def test_age_makes_bad_at_the_declared_time_and_a_new_sample_heals(program: Program) -> None:
    state, _ = signals.take(program, signals.initial(0), (Sample("PT-1", 1.0, 0),), 0)
    state, aged = signals.grow_old(program, state, S - 1)
    assert "PT-1" not in aged
    state, aged = signals.grow_old(program, state, max(state.due_ns, S))
    assert aged["PT-1"].cause is QualityCause.STALE
    assert "PT-2" not in state.samples  # still within its time of grace
    state, _ = signals.take(program, state, (Sample("PT-1", 1.0, 2 * S),), 2 * S)
    assert state.samples["PT-1"].quality is Quality.GOOD
    assert state.due_ns <= 3 * S


def test_the_time_to_look_again_is_never_late(program: Program) -> None:
    state = signals.initial(0)
    seen: dict[str, int] = {}
    for step in range(400):
        now_ns = step * 50 * MS
        tag = ("PT-1", "PT-2", "TT-1")[step % 3 if step % 50 < 25 else 2]
        state, _ = signals.take(program, state, (Sample(tag, 1.0, now_ns),), now_ns)
        seen[tag] = now_ns
        state, _ = signals.grow_old(program, state, now_ns)
        for name, last_ns in seen.items():
            stale = now_ns - last_ns >= program.stale_ns[name]
            assert (state.samples[name].quality is Quality.BAD) is stale


def test_what_was_never_seen_is_bad_after_the_time_of_grace(program: Program) -> None:
    state, aged = signals.grow_old(program, signals.initial(5 * S), 15 * S - 1)
    assert aged == {}
    assert state.due_ns == 15 * S
    state, aged = signals.grow_old(program, state, 15 * S)
    assert aged["PT-2"].cause is QualityCause.NEVER_SEEN
    assert aged["PT-2"].quality is Quality.BAD


def test_the_floor_of_a_paced_run_widens_the_age() -> None:
    program = program_of(stale_floor_ns=30 * S)
    assert program.stale_ns["PT-1"] == 30 * S


def test_a_lost_link_makes_all_tags_of_the_device_bad_until_they_are_read_again(program: Program) -> None:
    samples = tuple(Sample(tag, 1.0, 0) for tag in ("PT-1", "TT-1", "PU-A.flow"))
    state, _ = signals.take(program, signals.initial(0), samples, 0)
    state, lost = signals.link(program, state, (DeviceStatus("sensors", LinkState.FAILED, 1),))
    assert set(lost) == {"PT-1", "TT-1"}
    assert {sample.cause for sample in lost.values()} == {QualityCause.LINK_LOST}
    state, _ = signals.link(program, state, (DeviceStatus("sensors", LinkState.ONLINE, 2),))
    assert state.samples["PT-1"].quality is Quality.BAD
    state, _ = signals.take(program, state, (Sample("PT-1", 1.0, 3),), 3)
    assert state.samples["PT-1"].quality is Quality.GOOD


def test_interlocked_tags_keep_their_last_samples(program: Program) -> None:
    state = signals.initial(0)
    for step in range(50):
        new = (Sample("PT-1", float(step) / 10, step), Sample("TT-2", 1.0, step))
        state, _ = signals.take(program, state, new, step)
    assert [sample.t_ns for sample in state.rings["PT-1"]] == list(range(50 - RING, 50))
    assert "TT-2" not in state.rings  # no condition looks at it
