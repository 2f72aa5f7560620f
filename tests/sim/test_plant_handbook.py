"""Handbook cases from the running plant: capillaries at several temperatures, Ergun with inertia, Brenner's curves."""

from __future__ import annotations

import csv
from dataclasses import replace
from itertools import groupby
from pathlib import Path

import numpy as np
import pytest
from fakes.sim_rigs import S_NS, charged, column_rig, line, pump, rig_of, tracer

from rigd.model.orders import Action
from rigd.model.rig import Liquid, LiquidRole, Packing, Simulation, Vessel, VesselRole
from rigd_sim.physics.tubing import area
from rigd_sim.plant import RigPlant

REFERENCE = Path(__file__).parents[1] / "reference"


@pytest.mark.parametrize(
    ("degC", "viscosity_mPa_s"),
    [(5.0, 1.5182), (10.0, 1.3059), (20.0, 1.0016), (30.0, 0.79722), (40.0, 0.65273), (50.0, 0.54652), (60.0, 0.46603)],
)
def test_capillary_with_water(degC: float, viscosity_mPa_s: float) -> None:
    """Hagen-Poiseuille with the viscosity of IAPWS R12-08 (2008), table of water at 0.1 MPa: drop within 0.7 %.

    The plant's own curve goes through 0, 25 and 60 degC; between them it is off by up to 0.6 %.
    """
    rig = rig_of(
        tracer(),
        (Liquid("solvent", "water", LiquidRole.SOLVENT, "water", {}),),
        vessels=(Vessel("bottle", VesselRole.SUPPLY, 1000, 900, "solvent"), Vessel("flask", VesselRole.COLLECT, 1000)),
        pumps=(pump("PU", 1),),
        lines=(line("L-0", "bottle", "PU", 1.0, 100.0), line("L", "PU", "flask", 0.25, 1000.0)),
        simulation=Simulation(ambient_degC=degC),
    )
    plant = RigPlant(rig, 1)
    plant.tell("PU", Action.FILL, 5.0)
    plant.advance(60 * S_NS)
    plant.tell("PU", Action.DELIVER, 0.5)
    plant.advance(plant.now_ns + 60 * S_NS)
    expected_bar = 128.0 * viscosity_mPa_s * 1e-3 * 1.0 * 0.5e-6 / 60 / (np.pi * 0.25e-3**4) / 1e5
    assert plant.truth()["pressure:PU"] == pytest.approx(expected_bar, rel=7e-3)


@pytest.mark.parametrize("flow_mL_min", [1.0, 5.0, 20.0])
def test_ergun_with_inertia(flow_mL_min: float) -> None:
    """Public examination collection, fluid mechanics: spheres of 1.5 mm, e 0.4, water: dP/L = 375e3 V + 10.94e6 V^2.

    At 20 mL/min through 4.6 mm a third of the drop is inertia. Water at 20 degC (1.002 mPa s, 998 kg/m3): 0.6 %.
    """
    rig = column_rig(tracer(), Packing("glass", False, 1.5, 0.4), bore_mm=4.6, length_mm=500.0)
    plant = RigPlant(replace(rig, simulation=Simulation(ambient_degC=20.0)), 1)
    plant.tell("PU", Action.FILL, 30.0)
    plant.advance(300 * S_NS)
    plant.tell("PU", Action.DELIVER, flow_mL_min)
    plant.advance(plant.now_ns + 30 * S_NS)
    v = flow_mL_min * 1e-6 / 60 / area(4.6e-3)
    truth = plant.truth()
    expected = (375e3 * v + 10.9375e6 * v * v) * 0.5
    assert (truth["pressure:COL.in"] - truth["pressure:COL.out"]) * 1e5 == pytest.approx(expected, rel=6e-3)


def curves() -> list[tuple[float, dict[float, float]]]:
    """Brenner's step responses by Peclet number."""
    lines = (REFERENCE / "step_closed.csv").read_text("utf-8").splitlines()
    rows = csv.DictReader(text for text in lines if not text.startswith("#"))
    return [
        (float(pe), {float(row["theta"]): float(row["f"]) for row in group})
        for pe, group in groupby(rows, key=lambda row: row["peclet"])
    ]


@pytest.mark.parametrize(("pe", "points"), curves(), ids=lambda value: f"{value:g}" if isinstance(value, float) else "")
def test_brenner_step_response(pe: float, points: dict[float, float], monkeypatch: pytest.MonkeyPatch) -> None:
    """H. Brenner, Chem. Eng. Sci. 17 (1962) 229-243: what a flask collects behind the plant's bed, at the default mesh,
    with the dispersion coefficient set to this Peclet number: 0.5 % of the step."""
    plant = RigPlant(column_rig(tracer(), Packing("test", True, 1.0, 0.4)), 1)
    charged(plant, "A", 1000.0)
    contents, edge = plant.contents, plant.layout.edge_index["COL"]
    kernel = int(contents.first[edge])
    tau = plant.layout.edges[edge].volume / (1e-6 / 60)

    def hold(_flow: object) -> None:
        contents.exchange[kernel] = 1e-6 / 60 * plant.layout.edges[edge].cells / pe

    monkeypatch.setattr(contents, "disperse", hold)
    plant.tell("PU", Action.DELIVER, 1.0)
    start, window = plant.now_ns, 0.01
    for theta, expected in points.items():
        amounts = []
        for edge_theta in (theta - window, theta + window):
            plant.advance(start + round(edge_theta * tau * S_NS))
            plant.settle()
            amounts.append(plant.truth()["amount:flask:A"])
        found = (amounts[1] - amounts[0]) / (1.0 / 60 * 2 * window * tau)
        assert found == pytest.approx(expected, abs=5e-3), theta
