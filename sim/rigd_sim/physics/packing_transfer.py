"""Dispersion and mass transfer in packed beds of liquids. SI."""

from __future__ import annotations


def chung_wen(reynolds: float, viscosity: float, density: float) -> float:
    """Axial dispersion coefficient D_L [m2/s]: D_L rho/mu = Re / (0.2 + 0.011 Re^0.48), superficial Re.

    S. F. Chung, C. Y. Wen, AIChE J. 14 (1968) 857-866; liquids, 1e-3 < Re < 1e3.
    """
    return viscosity / density * reynolds / (0.2 + 0.011 * reynolds**0.48) if reynolds > 0.0 else 0.0


def wilson_geankoplis(reynolds: float, schmidt: float, voidage: float, diffusivity: float, diameter: float) -> float:
    """Film coefficient k_c [m/s]: e J_D = 1.09 Re^(-2/3), 0.0016 < Re < 55.

    E. J. Wilson, C. J. Geankoplis, Ind. Eng. Chem. Fundam. 5 (1966) 9-14.
    """
    sherwood: float = 1.09 / voidage * reynolds ** (1.0 / 3.0) * schmidt ** (1.0 / 3.0)
    return sherwood * diffusivity / diameter


def film_coefficient(reynolds: float, schmidt: float, voidage: float, diffusivity: float, diameter: float) -> float:
    """k_c [m/s] at any flow: Wilson and Geankoplis, never below diffusion into still liquid (Sh = 2)."""
    still = 2.0 * diffusivity / diameter
    return max(wilson_geankoplis(reynolds, schmidt, voidage, diffusivity, diameter), still) if reynolds > 0.0 else still


def bead_rate(diffusivity_in_bead: float, radius: float) -> float:
    """Linear driving force 15 De / R^2 [1/s] per bead liquid (E. Glueckauf, Trans. Faraday Soc. 51 (1955) 1540)."""
    return 15.0 * diffusivity_in_bead / radius**2
