"""Published and recomputed tables of hydraulics, residence times, ramps and hardware, row by row.

Each table stands in ``tests/reference`` with its source. Closed forms agree to 1e-6, or to the digits printed there.
"""

from __future__ import annotations

import csv
import math
from pathlib import Path

import pytest

from rigd.logic.student import gamma_quantile
from rigd_sim.physics import gel_bed, hardware, heat, packed_bed, packing_transfer, ramps, residence, tubing
from rigd_sim.physics.kinetics import arrhenius_factor, convective_first_order, convective_second_order
from rigd_sim.physics.properties import SOLVENTS

REFERENCE = Path(__file__).parents[1] / "reference"
Row = dict[str, str]


def table(name: str) -> list[object]:
    """Rows of a table as test parameters."""
    lines = (REFERENCE / f"{name}.csv").read_text("utf-8").splitlines()
    rows = list(csv.DictReader(line for line in lines if not line.startswith("#")))
    return [pytest.param(row, id="-".join(list(row.values())[:4])) for row in rows]


def same(found: float, text: str, rel: float = 1e-6) -> None:
    """To 1e-6 of the value, or to half a unit of the last digit printed if that is coarser."""
    digits = text.lower().partition("e")
    last = 10.0 ** -len(digits[0].partition(".")[2]) * 10.0 ** int(digits[2] or 0)
    assert found == pytest.approx(float(text), rel=rel, abs=0.52 * last)


@pytest.mark.parametrize("row", table("bed_pressure_drop"))
def test_bed_pressure_drop(row: Row) -> None:
    mu, rho, dp = float(row["viscosity_mPa_s"]) * 1e-3, float(row["density_kg_m3"]), float(row["bead_um"]) * 1e-6
    u = 1e-3
    if row["bore_mm"]:
        u = float(row["flow_mL_min"]) * 1e-6 / 60 / tubing.area(float(row["bore_mm"]) * 1e-3)
        same(packed_bed.reynolds(rho, u, dp, mu), row["reynolds"], 2e-5)
    drop = packed_bed.gradient(row["correlation"], mu, rho, u, dp, float(row["voidage"]))
    same(drop * float(row["length_mm"]) * 1e-3, row["drop_Pa"])


@pytest.mark.parametrize("row", table("bed_voidage_factor"))
def test_bed_voidage_factor(row: Row) -> None:
    same(packed_bed.resistance_factor(float(row["voidage"])), row["factor"])


@pytest.mark.parametrize("row", table("tube_pressure_drop"))
def test_tube_pressure_drop(row: Row) -> None:
    d, q, mu = float(row["bore_mm"]) * 1e-3, float(row["flow_mL_min"]) * 1e-6 / 60, float(row["viscosity_mPa_s"]) * 1e-3
    same(q / tubing.area(d), row["velocity_m_s"])
    same(tubing.reynolds(float(row["density_kg_m3"]), q / tubing.area(d), d, mu), row["reynolds"])
    same(tubing.resistance(mu, float(row["length_m"]), d) * q, row["drop_Pa"])


@pytest.mark.parametrize("row", table("taylor_aris"))
def test_taylor_aris(row: Row) -> None:
    d, length, diffusivity = float(row["bore_mm"]) * 1e-3, float(row["length_m"]), float(row["diffusivity_m2_s"])
    u = float(row["flow_mL_min"]) * 1e-6 / 60 / tubing.area(d)
    spread = tubing.taylor_aris(diffusivity, u, d)
    same(u, row["velocity_m_s"])
    same(u * d / diffusivity, row["peclet"])
    same(spread, row["dispersion_m2_s"])
    same(u * length / spread, row["vessel_number"])
    same(tubing.development(diffusivity, length / u, d), row["development"])
    same(residence.variance_open(u * length / spread) ** 0.5, row["sigma_over_tau"], 0.05)
    same((2.0 * spread / (u * length)) ** 0.5, row["sigma_over_tau"])


@pytest.mark.parametrize("row", table("pure_convection"))
def test_pure_convection(row: Row) -> None:
    at, value = float(row["at"]), row["value"]
    if row["what"] == "time":
        assert tubing.pure_convection_step(float(value)) == pytest.approx(at, rel=1e-6)
    else:
        model = convective_first_order if row["what"] == "first" else convective_second_order
        same(model(at), value)


@pytest.mark.parametrize("row", table("rtd_variance"))
def test_variance(row: Row) -> None:
    pe = float(row["peclet"])
    same(residence.variance_closed(pe), row["closed"])
    same(1.0 / residence.variance_closed(pe), row["tanks"])
    same(residence.variance_open(pe), row["open"])
    assert residence.peclet_of_variance(float(row["closed"])) == pytest.approx(pe, rel=1e-6)


@pytest.mark.parametrize("row", table("danckwerts"))
def test_danckwerts(row: Row) -> None:
    same(residence.danckwerts(float(row["peclet"]), float(row["damkoehler"])), row["left"])


@pytest.mark.parametrize("row", table("tanks_first_order"))
def test_tanks_first_order(row: Row) -> None:
    same(residence.tanks_first_order(float(row["tanks"]), float(row["damkoehler"])), row["left"])


@pytest.mark.parametrize("row", table("step_closed"))
def test_step_closed(row: Row) -> None:
    assert residence.step_closed(float(row["peclet"]), float(row["theta"])) == pytest.approx(float(row["f"]), abs=2e-8)


@pytest.mark.parametrize("row", table("step_semi_infinite"))
def test_step_semi_infinite(row: Row) -> None:
    pe, theta = float(row["peclet"]), float(row["theta"])
    same(residence.ogata_banks(pe, theta), row["ogata_banks"])
    same(0.5 * math.erfc(math.sqrt(pe / (4.0 * theta)) * (1.0 - theta)), row["leading"])
    assert residence.step_closed(pe, theta) == pytest.approx(float(row["closed"]), abs=1e-8)
    if row["resident"]:
        same(residence.flux_resident(pe, theta), row["resident"])


@pytest.mark.parametrize("row", table("wait_closed"))
def test_wait_closed(row: Row) -> None:
    same(residence.wait_closed(float(row["peclet"]), float(row["part"])), row["theta"], 2e-6)


@pytest.mark.parametrize("row", table("wait_tanks"))
def test_wait_tanks(row: Row) -> None:
    """What the planner waits for."""
    same(gamma_quantile(float(row["part"]), float(row["tanks"])), row["theta"])


@pytest.mark.parametrize("row", table("wait_reacting"))
def test_wait_reacting(row: Row) -> None:
    numbers = (float(row["peclet"]), float(row["damkoehler"]), float(row["part"]))
    same(residence.wait_reacting(*numbers, row["species"] == "product"), row["theta"], 5e-6)


COLUMNS = {
    "water": (997.05, 0.890e-3, 5e-3, 0.1, 150e-6, 0.38, 0.5),
    "acetonitrile": (776.6, 0.341e-3, 4.6e-3, 0.05, 75e-6, 0.36, 0.2),
    "ethanol": (785.2, 1.074e-3, 10e-3, 0.1, 300e-6, 0.40, 2.0),
}
"""The columns of ``bed_pressure_drop.csv``: kg/m3, Pa s, bore, length and bead [m], voidage, mL/min."""


@pytest.mark.parametrize("row", table("bed_dispersion"))
def test_bed_dispersion(row: Row) -> None:
    """The table's Reynolds numbers are rounded a little differently from ``bed_pressure_drop.csv``: 1e-4."""
    rho, mu, bore, length, dp, e, q = COLUMNS[row["liquid"]]
    u = q * 1e-6 / 60 / tubing.area(bore)
    spread = packing_transfer.chung_wen(float(row["reynolds"]), mu, rho)
    same(packed_bed.reynolds(rho, u, dp, mu), row["reynolds"], 1e-4)
    same(spread, row["dispersion_m2_s"], 1e-4)
    same(u / e * dp / spread, row["bead_peclet"], 1e-4)
    same(u / e * length / spread, row["bodenstein"], 1e-4)
    same(length * e / u, row["tau_s"], 1e-5)


@pytest.mark.parametrize("row", table("ramp_flow"))
def test_ramp_of_flow(row: Row) -> None:
    exit_min = ramps.linear_flow_exit(1.0, -0.015, float(row["dead_mL"]), float(row["t_min"]))
    if row["exit_min"]:
        same(exit_min, row["exit_min"])
    same(ramps.linear_flow_residence(1.0, -0.015, 1.0, exit_min), row["tau_min"])
    if row["naive_min"]:
        same(1.0 / (1.0 - 0.015 * float(row["t_min"])), row["naive_min"])


@pytest.mark.parametrize("row", table("ramp_tau"))
def test_ramp_of_residence_time(row: Row) -> None:
    slope = ramps.linear_tau_slope(float(row["alpha"]))
    same(slope, row["slope"])
    same(slope / float(row["alpha"]), row["ratio"])


@pytest.mark.parametrize("row", table("ramp_step"))
def test_step_of_flow(row: Row) -> None:
    same(ramps.step_residence(0.1, 1.0, 1.0, float(row["t_min"])), row["tau_min"])


@pytest.mark.parametrize("row", table("ramp_temperature"))
def test_ramp_of_temperature(row: Row) -> None:
    te = float(row["exit_s"])
    found = ramps.dose(lambda t: 0.01 * arrhenius_factor(58.0, 303.15 + t / 60.0, 313.15), te - 120.0, te)
    same(found, row["dose"])


@pytest.mark.parametrize("row", table("heat"))
def test_heat(row: Row) -> None:
    a, b, c, d = (float(row[key] or 0) for key in "abcd")
    if row["what"] == "film":  # conductivity, diameter: W/(m2 K)
        same(heat.laminar_coefficient(a, b), row["value"], 1e-4)
    elif row["what"] == "transfer_units":  # U, length, diameter, mL/min of water
        same(a * math.pi * c * b / (d * 1e-6 / 60 * 997.05 * 4181.3), row["value"], 1e-3)
    elif row["what"] == "adiabatic":
        same(heat.adiabatic_rise(a, b, c, d), row["value"])
    else:
        same(heat.lag_under_ramp(a / 60.0, b), row["value"])


@pytest.mark.parametrize("row", table("syringe"))
def test_syringe(row: Row) -> None:
    bore = float(row["bore_mm"]) * 1e-3
    same(hardware.barrel_area(bore) * 1e6, row["area_mm2"])
    same(hardware.stall_pressure(100.0, bore) / 1e5, row["bar_at_100N"])
    same(hardware.stall_pressure(200.0, bore) / 1e5, row["bar_at_200N"])
    same(10e5 * hardware.barrel_area(bore), row["N_for_10bar"])
    same(hardware.screw_turn_time(1e-3, bore, 0.1e-6 / 60), row["turn_s"])


@pytest.mark.parametrize("row", table("compliance"))
def test_compliance(row: Row) -> None:
    a, b, c = (float(row[key] or 0) for key in "abc")
    if row["what"] == "tau_bar_per_mL_min":  # restriction, mL/bar
        same(hardware.time_constant(a * 1e5 * 60e6, b * 1e-11), row["value"])
    elif row["what"] == "tau_bubble":  # restriction, mL of gas, bar absolute
        same(hardware.time_constant(a * 1e5 * 60e6, hardware.gas_compliance(b * 1e-6, c * 1e5)), row["value"])
    else:
        same(hardware.closed_flask(1.0, a, b, c) * (1.01325 if c == 0 else 1.0) * 1.01325, row["value"], 1e-4)


def test_gel_from_poor_to_good_solvent() -> None:
    """From methanol (0.95 mL/g) to dichloromethane (5.2): volume 5.47 times, bead diameter 1.762 times (arithmetic on
    figures from memory: F. Z. Doerwald 2002, ch. 1)."""
    poor, good = SOLVENTS["methanol"].swelling_mL_g, SOLVENTS["dichloromethane"].swelling_mL_g
    before = gel_bed.settled(poor, poor, 1e-6, 1.0, 1.0, 0.38, 1e-4)
    after = gel_bed.settled(good, poor, 1e-6, 1.0, 1.0, 0.38, 1e-4)
    assert after.bead_diameter / before.bead_diameter == pytest.approx(1.762, abs=5e-4)
    assert after.length / before.length == pytest.approx(5.47, abs=5e-3)
