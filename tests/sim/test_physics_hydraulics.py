"""Closed forms of pressure drop, tubes, properties and hardware against published and library values."""

from __future__ import annotations

import math

import fluids
import pytest

from rigd_sim.physics import hardware, packed_bed, packing_transfer, tubing
from rigd_sim.physics.properties import SOLVENTS, mixture_viscosity

EXACT = 1e-6


def test_ergun_anchor_of_the_fluids_library() -> None:
    """Anchor in the documentation of the open library ``fluids`` 1.3.1, and the library itself."""
    ours = packed_bed.ergun_gradient(1e-3, 1000.0, 1e-3, 0.8e-3, 0.4)
    assert ours == pytest.approx(1338.8671875, rel=EXACT)
    assert ours == pytest.approx(fluids.packed_bed.Ergun(0.8e-3, 0.4, 1e-3, 1000.0, 1e-3, 1.0), rel=EXACT)


def test_ergun_published_coefficients_for_small_spheres() -> None:
    """Public examination collection, fluid mechanics: 1.5 mm spheres, e 0.4, water: dP/L = 375e3 V + 10.94e6 V^2."""
    for v in (1e-3, 1e-2, 0.1):
        assert packed_bed.ergun_gradient(1e-3, 1000.0, v, 1.5e-3, 0.4) == pytest.approx(
            375_000.0 * v + 10_937_500.0 * v * v, rel=EXACT
        )


def test_ergun_gradient_of_fogler_example() -> None:
    """H. S. Fogler, Essentials of Chemical Reaction Engineering, ex. 5-4: beta0 = 25.8 kPa/m (recomputed 25.7309)."""
    ft, lb, hour = 0.3048, 0.45359237, 3600.0
    area, rho = 0.01414 * ft**2, 0.413 * lb / ft**3
    velocity = 104.4 * lb / hour / rho / area
    viscosity = 0.0673 * lb / (ft * hour)
    gradient = packed_bed.ergun_gradient(viscosity, rho, velocity, 0.25 / 12 * ft, 0.45)
    assert gradient == pytest.approx(25_730.9, rel=1e-4)
    assert gradient == pytest.approx(25_800.0, rel=5e-3)


@pytest.mark.parametrize(
    ("rho", "mu", "bore", "length", "dp", "e", "q", "ergun", "kozeny"),
    [
        (997.05, 0.890e-3, 5e-3, 0.1, 150e-6, 0.38, 0.5, 1766.455, 2116.905),
        (776.6, 0.341e-3, 4.6e-3, 0.05, 75e-6, 0.36, 0.2, 801.106, 960.727),
        (862.2, 0.552e-3, 6.6e-3, 0.1, 200e-6, 0.36, 1.0, 887.763, 1062.368),
        (785.2, 1.074e-3, 10e-3, 0.1, 300e-6, 0.40, 2.0, 428.105, 512.797),
    ],
)
def test_bench_columns(
    rho: float, mu: float, bore: float, length: float, dp: float, e: float, q: float, ergun: float, kozeny: float
) -> None:
    """Own cases, recomputed from the equations of Ergun 1952 and Carman 1937 with the library ``fluids``."""
    u = q * 1e-6 / 60 / tubing.area(bore)
    assert packed_bed.ergun_gradient(mu, rho, u, dp, e) * length == pytest.approx(ergun, rel=2e-6)
    assert packed_bed.carman_kozeny_gradient(mu, u, dp, e) * length == pytest.approx(kozeny, rel=2e-6)


@pytest.mark.parametrize(
    ("e", "factor"),
    [(0.26, 31.1561), (0.30, 18.1481), (0.36, 8.77915), (0.38, 7.00539), (0.40, 5.625), (0.45, 3.31962)],
)
def test_laminar_sensitivity_to_voidage(e: float, factor: float) -> None:
    """(1-e)^2/e^3, exact arithmetic."""
    assert packed_bed.resistance_factor(e) == pytest.approx(factor, rel=1e-5)


def test_incipient_fluidisation() -> None:
    """Public examination collection: 0.5 m of 1 mm glass in water: dP = (1-e)(rho_s-rho) g L = 4414.5 Pa."""
    assert packed_bed.fluidisation_drop(2500.0, 1000.0, 0.4, 0.5) == pytest.approx(4414.5, rel=EXACT)


@pytest.mark.parametrize(
    ("rho", "mu", "d_mm", "length", "q", "reynolds", "drop"),
    [
        (997.05, 0.890e-3, 0.5, 1.0, 1.0, 47.5462, 9669.8299),
        (997.05, 0.890e-3, 1.0, 1.0, 1.0, 23.7731, 604.36437),
        (997.05, 0.890e-3, 0.762, 2.0, 5.0, 155.991, 17925.817),
        (785.2, 1.074e-3, 0.508, 1.5, 0.3, 9.16204, 4928.0011),
    ],
)
def test_hagen_poiseuille(
    rho: float, mu: float, d_mm: float, length: float, q: float, reynolds: float, drop: float
) -> None:
    """G. Hagen 1839, J. Poiseuille 1846; f = 64/Re checked with ``fluids.friction_factor``."""
    d, flow = d_mm * 1e-3, q * 1e-6 / 60
    u = flow / tubing.area(d)
    re = tubing.reynolds(rho, u, d, mu)
    assert re == pytest.approx(reynolds, rel=1e-4)
    assert tubing.resistance(mu, length, d) * flow == pytest.approx(drop, rel=1e-4)
    friction = fluids.friction_factor(Re=re)
    assert tubing.resistance(mu, length, d) * flow == pytest.approx(friction * length / d * rho * u * u / 2, rel=EXACT)


@pytest.mark.parametrize(
    ("d_mm", "q", "length", "k", "group"),
    [
        (0.5, 0.1, 5.0, 9.381691e-5, 452.385),
        (1.0, 0.1, 5.0, 2.345498e-5, 452.370),
        (1.0, 1.0, 5.0, 2.345399e-3, 45.2389),
        (0.25, 0.1, 5.0, 3.752646e-4, 452.388),
    ],
)
def test_taylor_aris(d_mm: float, q: float, length: float, k: float, group: float) -> None:
    """G. I. Taylor 1953, R. Aris 1956. uL/K = 48 pi D L/Q does not depend on the bore (rows 1, 2, 4)."""
    d, flow = d_mm * 1e-3, q * 1e-6 / 60
    u = flow / tubing.area(d)
    dispersion = tubing.taylor_aris(1e-9, u, d)
    assert dispersion == pytest.approx(k, rel=EXACT)
    assert u * length / dispersion == pytest.approx(group, rel=1e-5)
    assert group == pytest.approx(48 * math.pi * 1e-9 * length / flow, rel=1e-4)


def test_pure_convection_front() -> None:
    """F = 1 - 1/(4 theta^2): times to 95, 99 and 99.9 % are 2.236, 5 and 15.811 tau (exact)."""
    for share, theta in ((0.95, 2.236068), (0.99, 5.0), (0.999, 15.811388)):
        assert tubing.pure_convection_step(theta) == pytest.approx(share, rel=EXACT)
    assert tubing.pure_convection_step(0.5) == 0.0


@pytest.mark.parametrize(
    ("rho", "mu", "bore", "dp", "e", "q", "length", "reynolds", "d_l", "bodenstein"),
    [
        (997.05, 0.890e-3, 5e-3, 150e-6, 0.38, 0.5, 0.1, 0.0713157, 3.13456e-7, 356.310),
        (776.6, 0.341e-3, 4.6e-3, 75e-6, 0.36, 0.2, 0.05, 0.0342592, 7.44046e-8, 374.404),
        (785.2, 1.074e-3, 10e-3, 300e-6, 0.40, 2.0, 0.1, 0.0930863, 6.25611e-7, 169.599),
    ],
)
def test_chung_wen(
    rho: float, mu: float, bore: float, dp: float, e: float, q: float, length: float, reynolds: float, d_l: float,
    bodenstein: float,
) -> None:  # fmt: skip
    """S. F. Chung, C. Y. Wen, AIChE J. 14 (1968) 857-866, three bench columns."""
    u = q * 1e-6 / 60 / tubing.area(bore)
    re = packed_bed.reynolds(rho, u, dp, mu)
    assert re == pytest.approx(reynolds, rel=2e-4)
    ours = packing_transfer.chung_wen(re, mu, rho)
    assert ours == pytest.approx(d_l, rel=5e-4)
    assert u / e * length / ours == pytest.approx(bodenstein, rel=5e-4)


def test_wilson_geankoplis() -> None:
    """E. J. Wilson, C. J. Geankoplis 1966, first bench column, D = 1e-9: k_c = 7.63563e-5 m/s."""
    ours = packing_transfer.wilson_geankoplis(0.0713157, 892.633, 0.38, 1e-9, 150e-6)
    assert ours == pytest.approx(7.63563e-5, rel=5e-5)  # the Reynolds number is given to six digits


@pytest.mark.filterwarnings("ignore")  # the library's own, when it reads its tables
@pytest.mark.parametrize("name", sorted(SOLVENTS))
def test_viscosity_between_the_points_follows_the_library(name: str) -> None:
    """The open library ``thermo`` 0.6.1 (as the table's source) at 10 and 45 degC, where the table has no point."""
    thermo = pytest.importorskip("thermo")
    known = thermo.Chemical({"THF": "tetrahydrofuran"}.get(name, name), T=298.15)
    for t in (283.15, 318.15):
        library = known.ViscosityLiquid(t, 101325.0)
        assert SOLVENTS[name].viscosity(t) == pytest.approx(library, rel=0.01)
        assert SOLVENTS[name].density(t) == pytest.approx(
            known.VolumeLiquid(t, 101325.0) ** -1 * known.MW / 1e3, rel=3e-3
        )
        assert SOLVENTS[name].vapour_pressure(t) == pytest.approx(known.VaporPressure(t), rel=0.02)


def test_table_points_are_met_exactly() -> None:
    """0, 25 and 60 degC are the points of the table; boiling margin: dichloromethane at 60 degC needs 1.95 bar."""
    assert SOLVENTS["water"].viscosity(298.15) == pytest.approx(0.8900e-3, rel=EXACT)
    assert SOLVENTS["ethanol"].density(333.15) == pytest.approx(754.05, rel=EXACT)
    assert SOLVENTS["dichloromethane"].vapour_pressure(333.15) == pytest.approx(194.85e3, rel=EXACT)


@pytest.mark.parametrize(
    ("name", "molar", "mass"),
    [
        ("THF", 124.0, 72.106),
        ("dichloromethane", 101.2, 84.933),
        ("chloroform", 114.2, 119.378),
        ("water", 75.3, 18.015),
    ],
)
def test_heat_capacities_are_those_of_the_crc_handbook(name: str, molar: float, mass: float) -> None:
    """CRC Handbook of Chemistry and Physics, liquid heat capacity at 25 degC [J/(mol K)], over the molar mass."""
    assert SOLVENTS[name].heat_capacity_J_kg_K == pytest.approx(molar / mass * 1e3, rel=1e-3)


def test_mixture_viscosity_is_between_and_logarithmic() -> None:
    """Arrhenius mixing: the geometric mean at half and half."""
    ethanol, toluene = SOLVENTS["ethanol"].viscosity(298.15), SOLVENTS["toluene"].viscosity(298.15)
    mixed = mixture_viscosity({"ethanol": 0.5, "toluene": 0.5}, 298.15)
    assert mixed == pytest.approx(math.sqrt(ethanol * toluene), rel=EXACT)


@pytest.mark.parametrize(
    ("bore_mm", "area_mm2", "bar_100N", "turn_s"),
    [(4.61, 16.6914, 59.911, 10.01), (10.30, 83.3229, 12.002, 49.99), (32.57, 833.154, 1.200, 499.9)],
)
def test_syringe_geometry(bore_mm: float, area_mm2: float, bar_100N: float, turn_s: float) -> None:
    """Exact geometry: piston area, pressure at 100 N, seconds per 1 mm screw turn at 0.1 mL/min."""
    bore = bore_mm * 1e-3
    assert hardware.barrel_area(bore) * 1e6 == pytest.approx(area_mm2, rel=1e-5)
    assert hardware.stall_pressure(100.0, bore) / 1e5 == pytest.approx(bar_100N, rel=5e-4)
    assert hardware.screw_turn_time(1e-3, bore, 0.1e-6 / 60) == pytest.approx(turn_s, rel=1e-3)


def test_compliance_times_and_closed_flask() -> None:
    """0.2 mL of gas at 3 bar before 5 bar per 0.5 mL/min: 40.0 s; 100 mL flask, 0.5 mL/min: 1.0666, 1.1921, 1.4475."""
    resistance = 5e5 / (0.5e-6 / 60)
    assert hardware.time_constant(resistance, hardware.gas_compliance(0.2e-6, 3e5)) == pytest.approx(40.0, rel=EXACT)
    for minutes, bar in ((10, 1.0666), (30, 1.1921), (60, 1.4475)):
        absolute = hardware.closed_flask(1.01325e5, 100e-6, 0.5e-6 / 60, minutes * 60.0)
        assert absolute / 1e5 == pytest.approx(bar, rel=1e-4)


@pytest.mark.parametrize(
    ("q", "c", "rate"),
    [(0.1, 0.01, 0.167), (1.0, 0.01, 1.67), (2.0, 0.02, 1.67), (2.0, 0.05, 0.667), (0.5, 0.2, 0.042)],
)
def test_dead_head_rate(q: float, c: float, rate: float) -> None:
    """dP/dt = Q/C [bar/s], exact."""
    assert hardware.dead_head_rate(q * 1e-6 / 60, c * 1e-6 / 1e5) / 1e5 == pytest.approx(rate, rel=1e-2)
