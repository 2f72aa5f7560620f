"""Pressure drop, voidage and compression of a packed bed. SI throughout; u is the superficial velocity.

Ergun:          dP/L = 150 mu (1-e)^2 u / (e^3 dp^2) + 1.75 rho (1-e) u^2 / (e^3 dp)
                S. Ergun, Chem. Eng. Prog. 48 (1952) 89-94; 1 < Re/(1-e) < 2500, below it is Blake-Kozeny.
Carman-Kozeny:  dP/L = 180 mu (1-e)^2 u / (e^3 dp^2);  P. C. Carman, Trans. Inst. Chem. Eng. 15 (1937) 150-166.
Carman:         the same with his term for faster flow, 180 + 2.871 Re1^0.9.
Erdim:          dP/L = (160 + 2.81 Re1^0.904) mu u (1-e)^2 / (dp^2 e^3), Re1 = Re/(1-e) from 2 to 3600 and, being
                Carman-Kozeny with 160, below;  E. Erdim, O. Akgiray, I. Demir, Powder Technol. 283 (2015) 488-504.
They differ by up to 20 % at bench flows; no interlock margin may assume better than +-30 %.
"""

from __future__ import annotations

from collections.abc import Callable

VOIDAGE_MIN = 0.26
"""Close packing of equal spheres (face-centred cubic 0.2595): a bed cannot be pressed below it."""


def reynolds(density: float, velocity: float, diameter: float, viscosity: float) -> float:
    """Particle Reynolds number rho u dp / mu."""
    return density * velocity * diameter / viscosity


def ergun_gradient(viscosity: float, density: float, velocity: float, diameter: float, voidage: float) -> float:
    """Pressure gradient by Ergun [Pa/m]."""
    solid = 1.0 - voidage
    viscous = 150.0 * viscosity * solid**2 * velocity / (voidage**3 * diameter**2)
    return viscous + 1.75 * density * solid * velocity**2 / (voidage**3 * diameter)


def carman_kozeny_gradient(viscosity: float, velocity: float, diameter: float, voidage: float) -> float:
    """Pressure gradient by Carman-Kozeny with the constant 180 [Pa/m]; laminar."""
    return 180.0 * viscosity * (1.0 - voidage) ** 2 * velocity / (voidage**3 * diameter**2)


def carman_gradient(viscosity: float, density: float, velocity: float, diameter: float, voidage: float) -> float:
    """Pressure gradient by Carman's full form [Pa/m]: 180 + 2.871 Re1^0.9 in place of 180."""
    solid = 1.0 - voidage
    modified = reynolds(density, velocity, diameter, viscosity) / solid
    factor: float = 180.0 + 2.871 * modified**0.9
    return factor * viscosity * velocity * solid**2 / (diameter**2 * voidage**3)


def erdim_gradient(viscosity: float, density: float, velocity: float, diameter: float, voidage: float) -> float:
    """Pressure gradient by Erdim, Akgiray and Demir [Pa/m]."""
    solid = 1.0 - voidage
    modified = reynolds(density, velocity, diameter, viscosity) / solid
    factor: float = 160.0 + 2.81 * modified**0.904
    return factor * viscosity * velocity * solid**2 / (diameter**2 * voidage**3)


def gradient(
    correlation: str, viscosity: float, density: float, velocity: float, diameter: float, voidage: float
) -> float:
    """Pressure gradient [Pa/m] by the correlation that a rig file names; ``KeyError`` for another."""
    return CORRELATIONS[correlation](viscosity, density, velocity, diameter, voidage)


CORRELATIONS: dict[str, Callable[[float, float, float, float, float], float]] = {
    "ergun": ergun_gradient,
    "carman-kozeny": lambda mu, rho, u, dp, e: carman_kozeny_gradient(mu, u, dp, e),
    "carman": carman_gradient,
    "erdim": erdim_gradient,
}


def resistance_factor(voidage: float) -> float:
    """(1-e)^2/e^3: how laminar resistance depends on voidage."""
    return (1.0 - voidage) ** 2 / voidage**3


def fluidisation_drop(solid_density: float, density: float, voidage: float, length: float) -> float:
    """Buoyant weight of the bed per area [Pa]: the most that an up-flow through a loose bed can drop."""
    return (1.0 - voidage) * (solid_density - density) * 9.81 * length


def pressed_voidage(
    voidage: float, compressibility_per_Pa: float, drop: float, highest: float = 0.0, hysteresis: float = 0.0
) -> float:
    """Voidage under the stress of its own pressure drop: e0 - kappa s, not below close packing.

    s is the drop while it rises; after a higher one (``highest`` since the bed was packed) the share ``hysteresis`` of
    the difference stays. The simplest defensible law; wall support is not in it (J. J. Stickel, A. Fotopoulos,
    Biotechnol. Prog. 17 (2001) 744-751, from memory: narrow beds bear more).
    """
    now = max(drop, 0.0)
    stress = now + hysteresis * max(highest - now, 0.0)
    return max(min(VOIDAGE_MIN, voidage), voidage - compressibility_per_Pa * stress)
