"""The fitter against the certified values of the NIST Statistical Reference Datasets (non-linear regression).

Files as NIST/ITL publishes them, in tests/reference/nist_strd. Pass mark: six digits on parameters, four on standard
errors, from both of NIST's starts. Nelson (two predictors) is not there. Lanczos1 has certified residuals of 1e-13,
below what double precision leaves of them, so its standard errors are not judged.
"""

from __future__ import annotations

import re
from pathlib import Path

import numpy as np
import pytest

from rigd.analysis.fitting import FitError, fit

FOLDER = Path(__file__).parents[1] / "reference" / "nist_strd"
exp, cos, sin, pi = np.exp, np.cos, np.sin, np.pi


def cubic_over_cubic(x, b):
    return (b[0] + b[1] * x + b[2] * x**2 + b[3] * x**3) / (1 + b[4] * x + b[5] * x**2 + b[6] * x**3)


def three_exponentials(x, b):
    return b[0] * exp(-b[1] * x) + b[2] * exp(-b[3] * x) + b[4] * exp(-b[5] * x)


def two_peaks(x, b):
    peaks = b[2] * exp(-((x - b[3]) ** 2) / b[4] ** 2) + b[5] * exp(-((x - b[6]) ** 2) / b[7] ** 2)
    return b[0] * exp(-b[1] * x) + peaks


def enso(x, b):
    yearly = b[1] * cos(2 * pi * x / 12) + b[2] * sin(2 * pi * x / 12)
    slow = b[4] * cos(2 * pi * x / b[3]) + b[5] * sin(2 * pi * x / b[3])
    return b[0] + yearly + slow + b[7] * cos(2 * pi * x / b[6]) + b[8] * sin(2 * pi * x / b[6])


def saturating(x, b):
    return b[0] * (1 - exp(-b[1] * x))


MODELS = {
    "Bennett5": lambda x, b: b[0] * (b[1] + x) ** (-1 / b[2]),
    "BoxBOD": saturating,
    "Chwirut1": lambda x, b: exp(-b[0] * x) / (b[1] + b[2] * x),
    "Chwirut2": lambda x, b: exp(-b[0] * x) / (b[1] + b[2] * x),
    "DanWood": lambda x, b: b[0] * x ** b[1],
    "ENSO": enso,
    "Eckerle4": lambda x, b: (b[0] / b[1]) * exp(-0.5 * ((x - b[2]) / b[1]) ** 2),
    "Gauss1": two_peaks,
    "Gauss2": two_peaks,
    "Gauss3": two_peaks,
    "Hahn1": cubic_over_cubic,
    "Kirby2": lambda x, b: (b[0] + b[1] * x + b[2] * x**2) / (1 + b[3] * x + b[4] * x**2),
    "Lanczos1": three_exponentials,
    "Lanczos2": three_exponentials,
    "Lanczos3": three_exponentials,
    "MGH09": lambda x, b: b[0] * (x**2 + x * b[1]) / (x**2 + x * b[2] + b[3]),
    "MGH10": lambda x, b: b[0] * exp(b[1] / (x + b[2])),
    "MGH17": lambda x, b: b[0] + b[1] * exp(-x * b[3]) + b[2] * exp(-x * b[4]),
    "Misra1a": saturating,
    "Misra1b": lambda x, b: b[0] * (1 - (1 + b[1] * x / 2) ** -2),
    "Misra1c": lambda x, b: b[0] * (1 - (1 + 2 * b[1] * x) ** -0.5),
    "Misra1d": lambda x, b: b[0] * b[1] * x / (1 + b[1] * x),
    "Rat42": lambda x, b: b[0] / (1 + exp(b[1] - b[2] * x)),
    "Rat43": lambda x, b: b[0] / (1 + exp(b[1] - b[2] * x)) ** (1 / b[3]),
    "Roszman1": lambda x, b: b[0] - b[1] * x - np.arctan(b[2] / (x - b[3])) / pi,
    "Thurber": cubic_over_cubic,
}


def certified(name):
    text = (FOLDER / f"{name}.dat").read_text()
    number = r"([-+]?[\d.]+(?:[eE][-+]?\d+)?)"
    rows = [tuple(map(float, row)) for row in re.findall(rf"b\d+ =\s+{number}\s+{number}\s+{number}\s+{number}", text)]
    body = text[text.rindex("Data:") :].splitlines()[1:]
    y, x = np.array([[float(word) for word in line.split()] for line in body if line.strip()]).T
    rss = float(re.search(rf"Residual Sum of Squares:\s+{number}", text)[1])
    return np.array(rows).T, x, y, rss


def test_every_file_has_a_model():
    assert {path.stem for path in FOLDER.glob("*.dat")} == set(MODELS)


QUICK = {"BoxBOD", "Misra1a", "Misra1b", "Rat43", "Chwirut2", "DanWood"}
NAMES = [name if name in QUICK else pytest.param(name, marks=pytest.mark.slow) for name in sorted(MODELS)]


@pytest.mark.parametrize("which", [0, 1])
@pytest.mark.parametrize("name", NAMES)
def test_certified_values(name, which):
    columns, x, y, rss = certified(name)
    found = fit(MODELS[name], x, y, columns[which])
    parameters, errors = np.array(found.parameters), np.array(found.standard_errors)
    if name.startswith("Lanczos"):  # the three terms of a sum of exponentials may come in any order
        order = np.ravel([(2 * term, 2 * term + 1) for term in np.argsort(parameters[1::2])])
        parameters, errors = parameters[order], errors[order]
    assert parameters == pytest.approx(columns[2], rel=1e-6)
    if name != "Lanczos1":
        assert errors == pytest.approx(columns[3], rel=1e-4)
        assert found.residual_sum_of_squares == pytest.approx(rss, rel=1e-6)


def test_saturation_kinetics_of_puromycin():
    """D. M. Bates and D. G. Watts, Nonlinear Regression Analysis and Its Applications (1988), treated cells.

    Vm and K with standard errors as an independent least-squares program returns them (recomputed).
    """
    x = [0.02, 0.02, 0.06, 0.06, 0.11, 0.11, 0.22, 0.22, 0.56, 0.56, 1.1, 1.1]
    y = [76, 47, 97, 107, 123, 139, 159, 152, 191, 201, 207, 200]
    found = fit(lambda c, p: p[0] * c / (p[1] + c), x, y, (100.0, 0.5))
    assert found.parameters == pytest.approx((212.683743, 0.0641212816), rel=1e-7)
    assert found.standard_errors == pytest.approx((6.947155, 0.00828095), rel=1e-5)
    assert found.residual_sd == pytest.approx(10.933658, rel=1e-7)


@pytest.mark.slow
def test_error_bars_cover_the_truth_as_often_as_they_say():
    """400 seeds of a known line through noise: about 68 % within one standard error (binomial band of 3 sigma)."""
    x, chance, inside = np.linspace(1, 10, 30), np.random.default_rng(8), 0
    for _ in range(400):
        y = 2.0 * x + chance.normal(0, 0.5, 30)
        found = fit(lambda at, p: p[0] * at, x, y, (1.0,))
        inside += abs(found.parameters[0] - 2.0) < found.standard_errors[0]
    assert 0.67 - 0.07 < inside / 400 < 0.67 + 0.07


def test_too_few_points_and_data_that_say_nothing_are_refused():
    with pytest.raises(FitError, match="2 points cannot give 2 parameters"):
        fit(MODELS["Misra1a"], [1, 2], [1, 2], (1.0, 1.0))
    with pytest.raises(FitError, match="do not determine"):
        fit(lambda x, p: (p[0] + p[1]) * x, [1, 2, 3], [1, 2, 3.1], (1.0, 1.0))
