"""Line, quadratic and custom models: inverted on the plain concentration axis."""

from __future__ import annotations

import numpy as np
import pytest
from made_curves import RISING, assay_curve, line_curve

import calib
from calib import Curve
from calib.curves.quantiles import student_quantile


def fieller(curve: Curve, y0: float, m: int) -> tuple[float, float]:
    """Closed limits of a straight line (Fieller 1954; Draper and Smith, ch. 3; from memory).

    Roots in d = x − x̄ of (b² − t²s²/Sxx) d² − 2b(y0 − ȳ) d + (y0 − ȳ)² − t²s²(1/m + 1/n).
    """
    x, y = curve.standards.concentration, curve.standards.response
    slope, _ = np.polyfit(x, y, 1)
    sxx, n = np.sum((x - x.mean()) ** 2), x.size
    s2 = np.sum((y - y.mean() - slope * (x - x.mean())) ** 2) / (n - 2)
    t2s2 = float(student_quantile(n - 2, 0.975)) ** 2 * s2
    above = y0 - y.mean()
    roots = np.roots([slope**2 - t2s2 / sxx, -2 * slope * above, above**2 - t2s2 * (1 / m + 1 / n)])
    low, high = sorted(roots + x.mean())
    return float(low), float(high)


@pytest.mark.parametrize("m", [1, 4])
@pytest.mark.parametrize("slope", [2.0, -2.0])
@pytest.mark.parametrize("y0", [7.0, 15.0, -9.0])
def test_line_limits_in_closed_form(slope: float, y0: float, m: int) -> None:
    curve = line_curve(slope)
    quantity = curve.invert([y0], replicates=m)
    low, high = fieller(curve, y0, m)
    assert quantity.lower[0] == pytest.approx(low, rel=1e-9)
    assert quantity.upper[0] == pytest.approx(high, rel=1e-9)


def test_a_slope_that_could_be_zero_leaves_the_interval_open() -> None:
    """Fieller's g >= 1: b² <= t²s²/Sxx."""
    curve = line_curve(slope=0.05, sd=1.0)
    quantity = curve.invert([5.0])
    assert quantity.state[0] in {"open-above", "open-below", "no-estimate"}
    assert np.isnan(quantity.u[0])
    assert np.isnan(quantity.k[0])


def parabola(low: float, high: float) -> Curve:
    """y = 10x − x² with turning point (5, 25) and a little alternating noise."""
    x = np.linspace(low, high, 12)
    return calib.fit(x, 10 * x - x**2 + np.tile([0.02, -0.02], 6), model="quadratic")


@pytest.mark.parametrize(
    ("low", "high", "x"), [(0.0, 4.0, 2.0), (6.0, 10.0, 8.0)], ids=["rising arm", "falling arm"]
)
def test_a_quadratic_is_read_on_the_arm_of_its_standards(low: float, high: float, x: float) -> None:
    curve = parabola(low, high)
    quantity = curve.invert([16.0])
    assert quantity.value[0] == pytest.approx(x, abs=0.02)
    assert quantity.state == ("ok",)
    assert quantity.position == ("inside",)
    q = 2.262157163  # t(0.975, 9)
    for end in (quantity.lower[0], quantity.upper[0]):
        se = np.sqrt(curve.reading_variance(end) + curve.fit_variance(end))
        assert abs(16.0 - curve.predict(end)) == pytest.approx(q * se, rel=1e-8)


@pytest.mark.parametrize(("low", "high", "towards"), [(0.0, 4.0, "open-above"), (6.0, 10.0, "open-below")])
def test_near_its_turning_point_a_quadratic_is_open(low: float, high: float, towards: str) -> None:
    quantity = parabola(low, high).invert([24.97, 25.02, 26.5])
    assert quantity.state == (towards, "no-estimate", "off-curve")
    assert np.isnan(quantity.value[1:]).all()


def test_back_calculation_stays_on_the_arm() -> None:
    curve = parabola(6.0, 10.0)
    np.testing.assert_allclose(curve.back_calculate().value, curve.standards.concentration, atol=0.03)


def test_a_custom_model_is_read_like_the_built_in_one() -> None:
    built_in = assay_curve()
    logistic = calib.custom_model(
        "logistic",
        ("zero", "infinite", "log_midpoint", "slope"),
        lambda x, a, d, c, b: d + (a - d) / (1 + np.exp(b * (np.log(np.where(x > 0, x, 1e-9)) - c))),
    )
    start = dict(zip(logistic.names, (RISING[0], RISING[1], np.log(RISING[2]), RISING[3]), strict=True))
    custom = calib.fit(
        built_in.standards.concentration, built_in.standards.response, model=logistic, start=start
    )
    y = [0.5, 1.2, 1.9]
    here, there = built_in.invert(y), custom.invert(y)
    np.testing.assert_allclose(there.value, here.value, rtol=1e-7)
    np.testing.assert_allclose(there.u, here.u, rtol=1e-6)
    np.testing.assert_allclose(there.lower, here.lower, rtol=1e-6)
    np.testing.assert_allclose(there.upper, here.upper, rtol=1e-6)


def test_a_custom_model_is_read_only_on_its_monotone_stretch() -> None:
    bump = calib.custom_model("bump", ("height", "width"), lambda x, h, w: h * np.exp(-((x / w) ** 2)))
    x = np.linspace(1.0, 6.0, 11)
    y = bump.response(x, (3.0, 4.0)) + np.tile([0.01, -0.01], 6)[:11]
    curve = calib.fit(x, y, model=bump, start={"height": 1.0, "width": 3.0})
    quantity = curve.invert([2.0, 4.0])
    assert quantity.value[0] == pytest.approx(4.0 * np.sqrt(np.log(1.5)), rel=0.02)
    assert np.isnan(quantity.value[1])
    assert quantity.state[1] == "off-curve"
