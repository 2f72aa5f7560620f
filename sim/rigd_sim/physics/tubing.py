"""Laminar flow and dispersion in round tubes. SI."""

from __future__ import annotations

import math


def area(diameter: float) -> float:
    """Cross-section [m2]."""
    return math.pi * diameter**2 / 4.0


def resistance(viscosity: float, length: float, diameter: float) -> float:
    """Hagen-Poiseuille: dP/Q = 128 mu L / (pi d^4) [Pa s/m3]; Re < 2000, entrance length 0.06 Re d neglected."""
    return 128.0 * viscosity * length / (math.pi * diameter**4)


def reynolds(density: float, velocity: float, diameter: float, viscosity: float) -> float:
    """rho u d / mu."""
    return density * velocity * diameter / viscosity


def taylor_aris(diffusivity: float, velocity: float, diameter: float) -> float:
    """Dispersion coefficient K = D (1 + Pe^2/192), Pe = u d / D [m2/s].

    G. I. Taylor, Proc. R. Soc. A 219 (1953) 186; R. Aris, Proc. R. Soc. A 235 (1956) 67. Valid when
    ``development`` >= 0.8; see there.
    """
    peclet = velocity * diameter / diffusivity
    return diffusivity * (1.0 + peclet**2 / 192.0)


def development(diffusivity: float, residence_time: float, diameter: float) -> float:
    """D tau / R^2: from about 0.8 the one-dimensional description holds (V. Ananthakrishnan, W. N. Gill, A. J. Barduhn,
    AIChE J. 11 (1965) 1063-1072, from memory); below about 0.01 pure convection does.
    """
    return diffusivity * residence_time / (diameter / 2.0) ** 2


def pure_convection_step(theta: float) -> float:
    """F(theta) of laminar flow without diffusion: 1 - 1/(4 theta^2) for theta > 1/2."""
    return 0.0 if theta <= 0.5 else 1.0 - 0.25 / theta**2


OUTER_MIN = 1.5875e-3
"""Outside diameter of common tubing, 1/16 in, up to 1 mm bore; beyond that the bore and 1.6 mm (common practice)."""
WALL_CONDUCTIVITY_W_M_K = 0.25
"""Fluoropolymers (common practice, no source)."""
ROOM_COEFFICIENT_W_M2_K = 25.0
"""Still air and radiation at a thin tube: about 15 + 6, up to 40 in a draught (common practice, no source)."""


def loss_conductance(conductivity: float, length: float, diameter: float) -> float:
    """U A of an unjacketed tube to the room [W/K]: laminar film (Nu = 3.66), polymer wall and air in series."""
    outer = max(OUTER_MIN, diameter + 1.6e-3 if diameter > 1e-3 else 0.0)
    inside = 1.0 / (3.66 * conductivity * math.pi)
    wall = math.log(outer / diameter) / (2.0 * math.pi * WALL_CONDUCTIVITY_W_M_K)
    outside = 1.0 / (ROOM_COEFFICIENT_W_M2_K * math.pi * outer)
    return length / (inside + wall + outside)


RINGS = 4


def ring_velocities(rings: int = RINGS) -> list[float]:
    """Mean velocity of each of ``rings`` of equal area, inside first, over the mean: 2 (1 - r^2/R^2) of laminar
    flow."""
    return [2.0 * (1.0 - (i + 0.5) / rings) for i in range(rings)]


def ring_exchange(diffusivity: float, diameter: float, rings: int = RINGS) -> list[float]:
    """Exchange rate of each ring with the next one outward [1/s], per volume of one ring.

    Radial diffusion in s = r^2/R^2: dc/dt = 4 D/R^2 d/ds (s dc/ds), finite volumes, and one common factor that
    makes the
    long-time dispersion of the rings exactly Taylor's u^2 R^2/(48 D). With no time to diffuse the rings are pure
    convection in ``rings`` steps; so one model covers the whole range, and ``development`` says where in it a tube is.
    """
    radius = diameter / 2.0
    plain = [4.0 * diffusivity / radius**2 * (i + 1) / rings * rings**2 for i in range(rings - 1)]
    # long-time dispersion of the plain rings: flux of (v - 1) through each boundary, squared, over its exchange
    passed, total = 0.0, 0.0
    for velocity, rate in zip(ring_velocities(rings), plain, strict=False):
        passed += velocity - 1.0
        total += passed**2 / rate
    wanted = radius**2 / (48.0 * diffusivity)
    return [rate * total / rings / wanted for rate in plain]
