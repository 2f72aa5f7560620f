"""Geometry of the example rigs, held against volumes worked out by hand (pi/4 d^2 L)."""

from __future__ import annotations

import math
from dataclasses import replace

import pytest
from fakes.conduct_rigs import one_pump, three_pumps, two_pumps

from rigd.logic.flow_path import FlowPathError, flow_path, tube_mL
from rigd.model.rig import End, Line


def test_a_metre_of_one_millimetre_tube_holds_785_microlitres() -> None:
    assert tube_mL(1.0, 1000.0) == pytest.approx(math.pi / 4)


def test_two_pump_rig() -> None:
    path = flow_path(two_pumps())
    a, b = path.feeds
    assert (a.pump, a.valve, a.merge) == ("PU-A", "V-A", "TEE")
    assert dict(a.supply) == {"solvent": "solvent", "reagent": "feed-A"}
    assert a.position_of("feed-A") == "reagent"
    assert a.position_of("feed-B") is None
    assert a.inlet_mL == pytest.approx(0.11781, abs=1e-5)
    assert (a.outlet_mL, b.outlet_mL) == (pytest.approx(0.11781, abs=1e-5), pytest.approx(0.17671, abs=1e-5))
    assert [segment.id for segment in path.trunk] == ["TEE", "L-1", "COL", "L-2", "IR", "L-3"]
    assert path.outlet_valve == "V-OUT"
    assert path.outlets["collect"].vessel == "flask"
    assert path.outlets["shut"].vessel == ""


def test_swollen_bed_holds_half_again_its_interstitial_liquid() -> None:
    """H = 1.5 for e 0.38 and liquid 0.31 of the bead volume: references, demonstration chemistry (constructed)."""
    path = flow_path(two_pumps())
    assert path.column_mL / path.interstitial_mL == pytest.approx(1.506, abs=1e-3)
    assert path.interstitial_mL == pytest.approx(math.pi / 4 * 6.6**2 * 100 / 1000 * 0.38)


def test_volumes_to_parts() -> None:
    path = flow_path(two_pumps())
    assert path.to_part_mL("TEE") == 0.0
    assert path.to_part_mL("COL") == pytest.approx(0.004 + 0.058905, abs=1e-5)
    assert path.to_part_mL("V-OUT") == pytest.approx(path.trunk_mL)
    assert path.past_part_mL("IR") == pytest.approx(path.trunk_mL - tube_mL(0.5, 450))
    with pytest.raises(KeyError):
        path.to_part_mL("bottle-S")


def test_wetted_volume_adds_feeds_and_dead_volumes() -> None:
    path = flow_path(two_pumps())
    feeds = sum(feed.inlet_mL + feed.outlet_mL + 0.02 for feed in path.feeds)
    assert path.wetted_mL == pytest.approx(path.trunk_mL + feeds)


def test_one_pump_rig_merges_where_its_line_ends() -> None:
    path = flow_path(one_pump())
    assert path.feeds[0].merge == "COL"
    assert path.trunk[0].id == "COL"


def test_third_pump_cuts_the_trunk() -> None:
    path = flow_path(three_pumps())
    assert [feed.merge for feed in path.feeds] == ["TEE", "TEE", "TEE2"]
    assert [section.pumps for section in path.sections] == [("PU-A", "PU-B"), ("PU-A", "PU-B", "PU-C")]
    assert path.to_part_mL("COL", start="TEE2") == pytest.approx(0.004 + tube_mL(0.5, 100))


def test_residence_adds_sections_with_their_own_flow() -> None:
    path = flow_path(three_pumps())
    first, second = path.sections
    flows = {"PU-A": 0.5, "PU-B": 0.5, "PU-C": 1.0}
    assert path.residence_s(flows) == pytest.approx(60 * (first.volume_mL / 1.0 + second.volume_mL / 2.0))
    assert path.residence_s({}) == math.inf


def test_supply_lines_name_their_vessels() -> None:
    found = {(line.pump, line.position): (line.vessel, line.liquid) for line in flow_path(two_pumps()).supply_lines}
    assert found[("PU-B", "reagent")] == ("bottle-B", "feed-B")
    assert found[("PU-A", "solvent")] == ("bottle-S", "solvent")


def test_pump_without_source_is_refused() -> None:
    rig = two_pumps()
    lines = tuple(line for line in rig.lines if line.end.part != "V-A")
    with pytest.raises(FlowPathError, match="PU-A has no source"):
        flow_path(replace(rig, lines=lines))


def test_dead_end_is_refused() -> None:
    rig = two_pumps()
    lines = tuple(line for line in rig.lines if line.id != "L-2")
    with pytest.raises(FlowPathError, match="no line leaves COL"):
        flow_path(replace(rig, lines=lines))


def test_circle_is_refused() -> None:
    rig = two_pumps()
    back = Line("L-2", End("COL"), End("TEE"), 0.5, 100, 20)
    with pytest.raises(FlowPathError, match="circle"):
        flow_path(replace(rig, lines=tuple(back if line.id == "L-2" else line for line in rig.lines)))


def test_branch_is_refused() -> None:
    rig = two_pumps()
    extra = Line("L-X", End("COL"), End("waste"), 0.5, 100, 20)
    with pytest.raises(FlowPathError, match="only an outlet valve may branch"):
        flow_path(replace(rig, lines=(*rig.lines, extra)))
