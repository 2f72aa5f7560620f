"""Pressure drop, voidage and compression of a packed bed. SI throughout; u is the superficial velocity.

Ergun:          dP/L = 150 mu (1-e)^2 u / (e^3 dp^2) + 1.75 rho (1-e) u^2 / (e^3 dp)
                S. Ergun, Chem. Eng. Prog. 48 (1952) 89-94; 1 < Re/(1-e) < 2500, below it is Blake-Kozeny.
Carman-Kozeny:  dP/L = 180 mu (1-e)^2 u / (e^3 dp^2);  P. C. Carman, Trans. Inst. Chem. Eng. 15 (1937) 150-166.
The two differ by a fixed 20 % at bench flows; no interlock margin may assume better than +-30 %.
"""

from __future__ import annotations

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


def resistance_factor(voidage: float) -> float:
    """(1-e)^2/e^3: how laminar resistance depends on voidage."""
    return (1.0 - voidage) ** 2 / voidage**3


def fluidisation_drop(solid_density: float, density: float, voidage: float, length: float) -> float:
    """Buoyant weight of the bed per area [Pa]: the most that an up-flow through a loose bed can drop."""
    return (1.0 - voidage) * (solid_density - density) * 9.81 * length


def pressed_voidage(voidage: float, compressibility_per_Pa: float, drop: float) -> float:
    """Voidage under the stress of its own pressure drop: e0 - kappa dP, not below close packing.

    The simplest defensible law (linear, reversible here); real gels show hysteresis and wall support (J. J. Stickel,
    A. Fotopoulos, Biotechnol. Prog. 17 (2001) 744-751).
    """
    return max(min(VOIDAGE_MIN, voidage), voidage - compressibility_per_Pa * max(drop, 0.0))
