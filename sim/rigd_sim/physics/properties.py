"""Liquid properties of common solvents from 0 to 60 degC.

Density, viscosity and vapour pressure at 0, 25 and 60 degC: reference equations of state (water, alcohols,
toluene) and the
DIPPR coefficients of Perry's Chemical Engineers' Handbook, 8th ed. 2008 (others), as given by the open library
``thermo`` 0.6.1
and compared with ``CoolProp`` 8; water at 0 degC and its viscosity from IAPWS-95 and IAPWS R12-08 (2008). Heat
capacity at
25 degC: the same, but the CRC Handbook (liquid, 25 degC) for THF, dichloromethane and chloroform, where the library
falls back on an estimate that is wrong by up to 40 %. Acetonitrile's viscosity at 25 degC is 0.342 here and 0.369
in the CRC Handbook.
Thermal conductivity: water IAPWS 2011; others rounded handbook values from memory, a band only.

Between the points: density quadratic in T, ln(viscosity) and ln(vapour pressure) quadratic in 1/T: exact at the three
points. Outside 0..60 degC they are extrapolations; viscosity and vapour pressure stay monotonic to about -20 and
100 degC.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass

from rigd.model.errors import ConfigError
from rigd.model.problems import Problem
from rigd.model.rig import PropertySet, RigDefinition
from rigd.ports.plant import PropertyLibrary
from rigd_sim.physics.constants import ZERO_CELSIUS_K

CONDUCTIVITY_W_M_K = 0.15
"""Of a solvent whose user gives none: common organic liquids are 0.12 to 0.2 (common practice, no source)."""

_POINTS_K = tuple(ZERO_CELSIUS_K + t for t in (0.0, 25.0, 60.0))


def _quadratic(x: float, xs: tuple[float, ...], ys: tuple[float, ...]) -> float:
    """Lagrange polynomial through three points."""
    total = 0.0
    for i in range(3):
        term = ys[i]
        for j in range(3):
            if j != i:
                term *= (x - xs[j]) / (xs[i] - xs[j])
        total += term
    return total


@dataclass(frozen=True, slots=True)
class Solvent:
    """A property set; tuples are at 0, 25 and 60 degC. ``source`` is printed beside every value."""

    id: str
    density_kg_m3: tuple[float, float, float]
    viscosity_mPa_s: tuple[float, float, float]
    vapour_kPa: tuple[float, float, float]
    heat_capacity_J_kg_K: float
    boiling_degC: float
    conductivity_W_m_K: float
    swelling_mL_g: float
    source: str

    def density(self, t_K: float) -> float:
        """Density [kg/m3]."""
        return _quadratic(t_K, _POINTS_K, self.density_kg_m3)

    def expansion(self, t_K: float) -> float:
        """Thermal expansion -(d rho/dT)/rho [1/K], from the density curve."""
        return (self.density(t_K - 1.0) - self.density(t_K + 1.0)) / (2.0 * self.density(t_K))

    def viscosity(self, t_K: float) -> float:
        """Dynamic viscosity [Pa s]."""
        return 1e-3 * _exponential(t_K, self.viscosity_mPa_s)

    def vapour_pressure(self, t_K: float) -> float:
        """Vapour pressure [Pa]."""
        return 1e3 * _exponential(t_K, self.vapour_kPa)


def _exponential(t_K: float, values: tuple[float, float, float]) -> float:
    inverse = tuple(1.0 / t for t in _POINTS_K)
    return math.exp(_quadratic(1.0 / t_K, inverse, tuple(math.log(v) for v in values)))


_EOS = "reference equation of state (thermo 0.6.1, CoolProp 8)"
_DIPPR = "DIPPR coefficients, Perry 8th ed. 2008 (thermo 0.6.1)"
_CRC = _DIPPR + "; heat capacity: CRC Handbook, 25 degC"

SOLVENTS: dict[str, Solvent] = {
    s.id: s
    for s in (
        Solvent("water", (999.84, 997.05, 983.20), (1.791, 0.8900, 0.4660), (0.611, 3.170, 19.946),
                4181.3, 100.0, 0.607, 1.0, "IAPWS-95, IAPWS R12-08"),
        Solvent("methanol", (809.72, 786.32, 752.81), (0.8060, 0.5437, 0.3437), (4.056, 16.981, 84.713),
                2534.6, 64.5, 0.20, 0.95, _EOS),
        Solvent("ethanol", (806.41, 785.13, 754.05), (1.8189, 1.0824, 0.5843), (1.602, 7.885, 46.734),
                2434.5, 78.4, 0.167, 1.05, _EOS),
        Solvent("acetonitrile", (802.86, 776.65, 738.22), (0.4467, 0.3418, 0.2514), (3.485, 12.147, 49.565),
                2229.0, 81.6, 0.19, 2.5, _DIPPR),
        Solvent("toluene", (885.42, 862.24, 829.23), (0.7697, 0.5526, 0.3796), (0.906, 3.799, 18.540),
                1701.1, 110.6, 0.131, 5.3, _EOS),
        Solvent("THF", (906.03, 879.96, 841.49), (0.6048, 0.4559, 0.3294), (6.387, 21.541, 83.116),
                1720.0, 66.0, 0.12, 5.5, _CRC),
        Solvent("ethyl acetate", (922.47, 893.62, 850.81), (0.5718, 0.4303, 0.2984), (3.302, 12.614, 55.795),
                1929.0, 77.1, 0.144, 3.0, _DIPPR),
        Solvent("dichloromethane", (1364.75, 1318.25, 1249.2), (0.5339, 0.4134, 0.3094), (19.27, 57.32, 194.85),
                1191.5, 39.8, 0.14, 5.2, _CRC),
        Solvent("chloroform", (1528.12, 1482.86, 1415.9), (0.7092, 0.5387, 0.3951), (8.010, 26.204, 97.37),
                956.6, 61.2, 0.117, 5.0, _CRC),
    )
}  # fmt: skip
"""Swelling: settled volume of about 1 % cross-linked polystyrene gel [mL/g dry], common practice figures, +-15 %."""


def solvents_of(rig: RigDefinition) -> dict[str, Solvent]:
    """The property sets that a rig uses: its own before those known here. ``ConfigError`` for a name nobody knows."""
    known = SOLVENTS | {own.id: _own(own) for own in rig.properties}
    for liquid in rig.liquids:
        if liquid.properties not in known:
            message = f"liquid {liquid.id}: no properties are known for {liquid.properties!r}"
            remedy = f"known: {', '.join(sorted(known))}; or write [[properties]] of your own, with their source"
            raise ConfigError((Problem("properties-unknown", message, remedy, key=f"liquids[{liquid.id}].properties"),))
    return {name: known[name] for name in sorted({liquid.properties for liquid in rig.liquids})}


def sets_of(rig: RigDefinition) -> tuple[PropertySet, ...]:
    """The same as values of the rig, to be printed with their sources."""
    return tuple(
        PropertySet(
            name, _scaled(s.density_kg_m3, 1e-3), s.viscosity_mPa_s, _scaled(s.vapour_kPa, 1e-2),
            s.heat_capacity_J_kg_K * 1e-3, s.boiling_degC, s.source, s.swelling_mL_g,
        )
        for name, s in solvents_of(rig).items()
    )  # fmt: skip


def _scaled(three: tuple[float, float, float], factor: float) -> tuple[float, float, float]:
    return three[0] * factor, three[1] * factor, three[2] * factor


PROPERTIES = PropertyLibrary("simulated", sets_of)


def _own(own: PropertySet) -> Solvent:
    return Solvent(
        own.id, _scaled(own.density_g_mL, 1e3), own.viscosity_mPa_s, _scaled(own.vapour_bar, 100.0),
        own.heat_capacity_J_g_K * 1e3, own.boiling_degC, CONDUCTIVITY_W_M_K, own.swelling_mL_g, own.source,
    )  # fmt: skip


def mixture_viscosity(fractions: dict[str, float], t_K: float, sets: Mapping[str, Solvent] = SOLVENTS) -> float:
    """Viscosity of a mixture [Pa s]: ln mu = sum phi ln mu (S. Arrhenius 1887), phi volume fractions.

    Ideal mixing; water-alcohol mixtures exceed it by up to a factor of about 2.5 (not modelled).
    """
    total = sum(fractions.values())
    return math.exp(sum(f / total * math.log(sets[name].viscosity(t_K)) for name, f in fractions.items()))
