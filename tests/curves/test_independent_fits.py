"""The same fits by an independent general-purpose library, and covariance by differences."""

from __future__ import annotations

import lmfit
import numpy as np
import pytest
from made_standards import FALLING, RISING, assay_standards

import calib
from calib import Curve


def logistic(x: np.ndarray, zero: float, infinite: float, midpoint: float, slope: float) -> np.ndarray:
    return infinite + (zero - infinite) / (1.0 + (x / midpoint) ** slope)


def saturation(x: np.ndarray, offset: float, capacity: float, half: float) -> np.ndarray:
    return offset + capacity * x / (half + x)


def fitted_elsewhere(function: object, curve: Curve, weights: np.ndarray | None) -> lmfit.model.ModelResult:
    """A fit started away from calib's answer."""
    model = lmfit.Model(function)
    parameters = model.make_params(**{n: 1.3 * v + 0.01 for n, v in curve.parameters.items()})
    x, y = curve.standards.concentration, curve.standards.response
    tight = {"ftol": 1e-14, "xtol": 1e-14, "gtol": 1e-14}
    return model.fit(y, parameters, x=x, weights=weights, fit_kws=tight, scale_covar=True)


CASES = [("4PL", logistic, RISING), ("4PL", logistic, FALLING), ("saturation", saturation, RISING)]


@pytest.mark.parametrize("weighted", [False, True], ids=["unweighted", "weighted"])
@pytest.mark.parametrize(("name", "function", "truth"), CASES)
def test_estimates_and_standard_errors(
    name: str, function: object, truth: tuple[float, ...], weighted: bool
) -> None:
    x, y = assay_standards(truth)
    sd = 0.01 + 0.05 * np.abs(y) if weighted else None
    curve = calib.fit(x, y, model=name, relative_sd=sd)
    other = fitted_elsewhere(function, curve, None if sd is None else 1.0 / sd)
    assert curve.residual_sum <= other.chisqr * (1 + 1e-12)
    np.testing.assert_allclose(curve.values, list(other.best_values.values()), rtol=1e-5)
    errors = [other.params[n].stderr for n in curve.parameters]
    np.testing.assert_allclose(list(curve.standard_errors.values()), errors, rtol=1e-3)


def test_covariance_is_the_inverse_of_the_information_by_differences() -> None:
    x, y = assay_standards()
    curve = calib.fit(x, y, relative_sd=0.01 + 0.05 * y)
    w = (0.01 + 0.05 * y) ** -2
    p = curve.values
    j = np.empty((x.size, 4))
    for i in range(4):
        step = 1e-6 * abs(p[i])
        high, low = p.copy(), p.copy()
        high[i] += step
        low[i] -= step
        j[:, i] = (logistic(x, *high) - logistic(x, *low)) / (2 * step)
    expected = curve.residual_sd**2 * np.linalg.inv((j.T * w) @ j)
    np.testing.assert_allclose(curve.covariance, expected, rtol=1e-5)


def test_bands_of_a_line_in_closed_form() -> None:
    """Draper and Smith, Applied Regression Analysis, ch. 1 (from memory); t(0.975, 8) = 2.306004."""
    rng = np.random.default_rng(1)
    x = np.linspace(1.0, 10.0, 10)
    curve = calib.fit(x, 1.0 + 2.0 * x + rng.normal(0, 0.3, 10), model="line")
    at = np.array([0.0, 5.0, 12.0])
    share = 1 / 10 + (at - x.mean()) ** 2 / np.sum((x - x.mean()) ** 2)
    t = 2.306004135
    lower, upper = curve.band(at)
    np.testing.assert_allclose(upper - lower, 2 * t * curve.residual_sd * np.sqrt(share), rtol=1e-8)
    lower, upper = curve.prediction_band(at, replicates=3)
    np.testing.assert_allclose(upper - lower, 2 * t * curve.residual_sd * np.sqrt(share + 1 / 3), rtol=1e-8)


def test_shown_figures_of_merit() -> None:
    """R² = 1 − SS/SS_total; AICc = n ln(SS/n) + 2k + 2k(k+1)/(n−k−1), k = parameters + 1."""
    x, y = assay_standards()
    curve = calib.fit(x, y)
    ss = np.sum((y - curve.predict(x)) ** 2)
    assert curve.residual_sum == pytest.approx(ss, rel=1e-12)
    assert curve.r_squared == pytest.approx(1 - ss / np.sum((y - y.mean()) ** 2), rel=1e-12)
    assert curve.aicc == pytest.approx(16 * np.log(ss / 16) + 10 + 60 / 10, rel=1e-12)


def test_back_calculated_relative_errors() -> None:
    x, y = np.array([0.0, 1.0, 2.0, 4.0]), np.array([0.1, 2.0, 4.2, 7.9])
    back = calib.fit(x, y, model="line").back_calculate()
    slope, intercept = np.polyfit(x, y, 1)
    np.testing.assert_allclose(back.value, (y - intercept) / slope, rtol=1e-12)
    assert np.isnan(back.relative_error[0])
    np.testing.assert_allclose(back.relative_error[1:], back.value[1:] / x[1:] - 1, rtol=1e-12)
