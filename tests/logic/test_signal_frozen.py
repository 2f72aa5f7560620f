"""A signal that stands still: equal raw codes of a noisy instrument are not believed (safety reference, 7.3)."""

from __future__ import annotations

from dataclasses import replace

from fakes.rigs import program_of, two_pump_rig

from rigd.logic.protect import signals
from rigd.logic.protect.signals import STANDS_STILL, Signals
from rigd.model.samples import Quality, QualityCause, Sample

PERIOD_NS = 200_000_000


def program(noise: float = 0.01):
    rig = two_pump_rig()
    return program_of(replace(rig, tags=tuple(replace(t, noise=noise) if t.id == "PT-1" else t for t in rig.tags)))


def fed(codes: list[int | None], noise: float = 0.01) -> Signals:
    state, running = signals.initial(0), program(noise)
    for number, code in enumerate(codes, 1):
        sample = Sample("PT-1", 2.0, number * PERIOD_NS, raw=code)
        state, _ = signals.take(running, state, [sample], number * PERIOD_NS)
    return state


def verdict(state: Signals) -> tuple[Quality, QualityCause]:
    sample = state.samples["PT-1"]
    return sample.quality, sample.cause


def test_one_code_short_is_still_good() -> None:
    assert verdict(fed([7] * (STANDS_STILL - 1))) == (Quality.GOOD, QualityCause.NONE)


def test_equal_codes_in_a_row_are_frozen() -> None:
    assert verdict(fed([7] * STANDS_STILL)) == (Quality.BAD, QualityCause.FROZEN)


def test_a_code_that_moves_is_believed_again() -> None:
    assert verdict(fed([7] * (STANDS_STILL + 5) + [8])) == (Quality.GOOD, QualityCause.NONE)
    assert verdict(fed([7] * (STANDS_STILL - 1) + [8] + [7] * (STANDS_STILL - 1))) == (Quality.GOOD, QualityCause.NONE)


def test_an_instrument_without_declared_noise_or_code_may_stand_still() -> None:
    assert verdict(fed([7] * 100, noise=0.0)) == (Quality.GOOD, QualityCause.NONE)
    assert verdict(fed([None] * 100)) == (Quality.GOOD, QualityCause.NONE)


def test_the_same_sample_twice_is_no_second_code() -> None:
    running, state = program(), signals.initial(0)
    for _ in range(100):
        state, _taken = signals.take(running, state, [Sample("PT-1", 2.0, PERIOD_NS, raw=7)], PERIOD_NS)
    assert verdict(state) == (Quality.GOOD, QualityCause.NONE)
