"""The estimate of a cold entry against a bed whose temperature profile is written out, integrated by another rule."""

from __future__ import annotations

import math

import pytest

from rigd.report.cold_entry import ROOM_DEGC, cold_entry
from rigd.report.data import PointRow

JACKET_DEGC, ENERGY_KJ_MOL = 60.0, 58.0


def point(flow_mL_min: float, bed_degC: float) -> PointRow:
    flows = {"PU-A": flow_mL_min}
    return PointRow(
        "P", "point", flows, 60.0, 60.0, "collected", True, 1.0, 0.5, 0.001, 9, 0.5, 1.0, 2.0, 1.0, bed_degC
    )


def bed_at(units: float, z: float) -> float:
    return JACKET_DEGC - (JACKET_DEGC - ROOM_DEGC) * math.exp(-units * z)


def share(units: float, place: float) -> float:
    """Simpson's rule over the same heat balance."""

    def k(z: float) -> float:
        return math.exp(-1000 * ENERGY_KJ_MOL / 8.314462618 / (bed_at(units, z) + 273.15))

    n = 200
    weights = [1 if i in (0, n) else 4 if i % 2 else 2 for i in range(n + 1)]
    return sum(w * k(i / n) for i, w in enumerate(weights)) / (3 * n) / k(place)


@pytest.mark.parametrize("place", [0.5, 0.8])
def test_units_of_transfer_are_found_from_the_fastest_point_and_scale_with_the_flow(place):
    points = [point(4.0, bed_at(3.9, place)), point(1.0, bed_at(15.6, place))]
    found = cold_entry(points, JACKET_DEGC, ENERGY_KJ_MOL, place)
    assert found is not None
    expected = sorted([share(3.9, place), share(15.6, place)])
    assert found == pytest.approx(expected, rel=1e-4)
    assert found[1] < 1.0


@pytest.mark.parametrize(
    ("points", "jacket", "energy"),
    [
        ([], 60.0, 58.0),
        ([point(4.0, 59.9)], 60.0, 58.0),
        ([point(4.0, 54.0)], 60.0, 0.0),
        ([point(4.0, 21.0)], 22.2, 58.0),
        ([point(4.0, math.nan)], 60.0, 58.0),
        ([point(4.0, 10.0)], 60.0, 58.0),
    ],
)
def test_nothing_is_said_where_nothing_can_be_seen(points, jacket, energy):
    assert cold_entry(points, jacket, energy) is None
