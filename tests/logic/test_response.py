"""Response time against process safety time: the rule of the dead-headed pump, on rigs built by hand."""

from __future__ import annotations

from dataclasses import replace

import pytest
from fakes.conduct_rigs import demo_recipe, two_pumps

from rigd.logic.response import SHARE, exchange_s, largest_flow_mL_min, responses
from rigd.model.devices import DeviceSpec, LinkSpec
from rigd.model.orders import Stop
from rigd.model.protection import Condition, ConditionKind, Interlock

LOCK = Interlock(
    "P-HIGH", "pressure", (Condition(ConditionKind.HIGH, "PT-1", 8.0),), Stop.CUT, on_delay_ns=200_000_000, rating=20.0
)


def rig(compliance_mL_bar: float, lock: Interlock = LOCK, baud: int = 115200):
    base = two_pumps()
    devices = tuple(
        DeviceSpec(name, "d", "x", link, "1", unit, ())
        for name, link, unit in (("sensors", "b2", ""), ("dev-PU-A", "b1", "PU-A"), ("dev-PU-B", "b1", "PU-B"))
    )
    return replace(
        base,
        pumps=tuple(replace(pump, compliance_mL_bar=compliance_mL_bar / 2) for pump in base.pumps),
        interlocks=(lock,),
        devices=devices,
        links=(LinkSpec("b1", "simulated", baud), LinkSpec("b2", "simulated", baud)),
    )


# Dead-headed pump, dP/dt = Q / C (volume balance): total flow mL/min, compliance mL/bar, seconds to gain 5 bar.
@pytest.mark.parametrize(
    ("flow", "compliance", "seconds"),
    [(0.1, 0.01, 30), (0.2, 0.02, 30), (0.5, 0.05, 30), (1.0, 0.01, 3), (2.0, 0.01, 1.5), (2.0, 0.2, 30)],
)
def test_time_to_gain_five_bar(flow, compliance, seconds):
    lock = replace(LOCK, rating=13.0)
    recipe = demo_recipe()
    slow = replace(
        recipe,
        prime=None, conditioning=None, leak_test=None, switchover=None,
        flush=replace(recipe.flush, total_mL_min=flow),
        points=(),
    )  # fmt: skip
    (found,) = responses(replace(rig(compliance, lock), flush_mL_min=flow), slow)
    assert found.safety_s == pytest.approx(seconds)


def test_budget_is_the_sum_of_its_parts():
    """115200 baud: 120 bytes of 10 bits in 10.4 ms, and 50 ms to answer; two pumps on one line after one exchange."""
    (found,) = responses(rig(0.02))
    one = 1200 / 115200 + 0.05
    assert exchange_s(LinkSpec("x", "simulated", 115200)) == pytest.approx(one)
    budget = found.budget
    assert budget.exchange_s == pytest.approx(one)
    assert budget.order_s == pytest.approx(3 * one)
    assert budget.total_s == pytest.approx(0.0 + 0.2 + one + 0.2 + 0.005 + 3 * one + 0.1)


def test_largest_flow_is_where_the_margin_is_one():
    (found,) = responses(rig(0.02))
    assert found.flow_max_mL_min is not None
    again = replace(demo_recipe(), flush=replace(demo_recipe().flush, total_mL_min=found.flow_max_mL_min), points=())
    again = replace(again, prime=None, conditioning=None, switchover=None, leak_test=None)
    (at_limit,) = responses(replace(rig(0.02), flush_mL_min=0.1), again)
    assert at_limit.margin == pytest.approx(1.0)
    assert at_limit.safety_s == pytest.approx(at_limit.budget.total_s / SHARE)


def test_a_slow_line_or_a_stiff_rig_is_not_fit():
    recipe = demo_recipe()
    assert responses(rig(0.02), recipe)[0].fit
    assert not responses(rig(0.002), recipe)[0].fit
    assert not responses(rig(0.02, baud=1200), recipe)[0].fit
    assert responses(rig(0.02, replace(LOCK, on_delay_ns=5_000_000_000)), recipe)[0].margin < 1


def test_a_limit_at_the_rating_leaves_no_time():
    lock = replace(LOCK, rating=8.0)
    assert responses(rig(0.02, lock))[0].safety_s == 0.0
    assert not responses(rig(0.02, lock))[0].fit


def test_temperature_has_a_response_but_no_process_safety_time():
    lock = Interlock("HOT", "hot", (Condition(ConditionKind.HIGH, "TT-1", 75.0),), Stop.QUENCH)
    (found,) = responses(rig(0.02, lock))
    assert found.safety_s is None
    assert found.margin is None
    assert found.fit
    assert found.budget.total_s > 1.0


def test_causes_without_a_signal_are_left_out():
    lock = Interlock("LINK-x", "link", (Condition(ConditionKind.LINK, "sensors"),), Stop.CUT)
    assert responses(rig(0.02, lock)) == ()


def test_largest_flow_is_that_of_the_fastest_phase():
    assert largest_flow_mL_min(two_pumps(), demo_recipe()) == 4.0
    assert largest_flow_mL_min(two_pumps()) == 10.0
    fast = replace(demo_recipe(), prime=replace(demo_recipe().prime, total_mL_min=6.0))
    assert largest_flow_mL_min(two_pumps(), fast) == 6.0
