"""How a solvent's viscosity changes with temperature: what a pressure drop must be divided by before it is judged.

Values at 0, 25 and 60 degC: reference equations of state (water IAPWS R12-08, alcohols, toluene) and the DIPPR
coefficients of Perry's Chemical Engineers' Handbook, 8th ed. 2008 (others), as given by the open library ``thermo``
0.6.1. Between them ln(viscosity) is quadratic in 1/T: exact at the three points.
"""

from __future__ import annotations

import math
from collections.abc import Iterable
from functools import lru_cache

from rigd.model.rig import PropertySet

ZERO_CELSIUS_K = 273.15
VISCOSITY_MPA_S: dict[str, tuple[float, float, float]] = {
    "water": (1.791, 0.8900, 0.4660),
    "methanol": (0.8060, 0.5437, 0.3437),
    "ethanol": (1.8189, 1.0824, 0.5843),
    "acetonitrile": (0.4467, 0.3418, 0.2514),
    "toluene": (0.7697, 0.5526, 0.3796),
    "THF": (0.6048, 0.4559, 0.3294),
    "ethyl acetate": (0.5718, 0.4303, 0.2984),
    "dichloromethane": (0.5339, 0.4134, 0.3094),
    "chloroform": (0.7092, 0.5387, 0.3951),
}

_POINTS_K = tuple(ZERO_CELSIUS_K + t for t in (0.0, 25.0, 60.0))
_COLDEST_DEGC, _HOTTEST_DEGC = -20.0, 100.0


def viscosities(names: Iterable[str], own: Iterable[PropertySet]) -> dict[str, tuple[float, float, float]]:
    """The triples of these property sets, a rig's own before those known here; unknown names are left out."""
    known = VISCOSITY_MPA_S | {one.id: one.viscosity_mPa_s for one in own}
    return {name: known[name] for name in names if name in known}


@lru_cache(maxsize=64)  # one look asks for the same few temperatures for every line
def viscosity_mPa_s(points: tuple[float, float, float], temperature_degC: float) -> float:
    """Viscosity between the three points; taken as constant below -20 and above 100 degC."""
    t_K = ZERO_CELSIUS_K + min(max(temperature_degC, _COLDEST_DEGC), _HOTTEST_DEGC)
    total = 0.0
    for i, own in enumerate(_POINTS_K):
        term = math.log(points[i])
        for other in _POINTS_K[:i] + _POINTS_K[i + 1 :]:
            term *= (1.0 / t_K - 1.0 / other) / (1.0 / own - 1.0 / other)
        total += term
    return math.exp(total)
