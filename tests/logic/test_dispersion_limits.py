"""Where the sum of a path's dispersion is an estimate only: Taylor-Aris and its limit."""

from __future__ import annotations

import pytest

from rigd.logic.dispersion import DEVELOPED, development, relative_variance
from rigd.logic.flow_path import Segment


@pytest.mark.parametrize(
    ("bore_mm", "flow_mL_min", "number", "sigma"),
    [(0.5, 0.1, 9.42478, 0.0664907), (1.0, 0.1, 9.42478, 0.0664918), (1.0, 1.0, 0.942478, 0.210261),
     (0.25, 0.1, 9.42478, 0.0664905)],
)  # fmt: skip
def test_five_metres_of_tube(bore_mm: float, flow_mL_min: float, number: float, sigma: float) -> None:
    """D tau/R^2 and sigma_t/tau of 5 m tubes at D 1e-9 m2/s, recomputed from G. I. Taylor 1953 and R. Aris 1956."""
    volume_mL = 3.141592653589793 * bore_mm**2 / 4.0 * 5000.0 / 1000.0
    tube = Segment("L", "line", volume_mL, bore_mm, 5000.0, 70.0)
    assert development(tube, flow_mL_min) == pytest.approx(number, rel=1e-6)
    assert relative_variance(tube, flow_mL_min) ** 0.5 == pytest.approx(sigma, rel=1e-5)
    assert development(tube, 10.0) < DEVELOPED < development(tube, 0.1)
