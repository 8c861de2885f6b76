"""Noise-free curves are recovered, whatever the units."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from made_standards import FALLING, RISING, assay_standards

import calib
from calib.models import response_model

WIDE = np.repeat(np.geomspace(0.01, 100.0, 9), 2)
NARROW = np.repeat(np.linspace(0.1, 10.0, 9), 2)
SCALES = (1e-6, 1.0, 1e6)

# Model, true parameters for midpoint 1 and span of order 1, standards, and how each
# parameter scales: powers of (response unit, concentration unit).
TRUTHS = [
    ("line", (0.1, 2.0), NARROW, ((1, 0), (1, -1))),
    ("line", (0.1, -2.0), NARROW, ((1, 0), (1, -1))),
    ("proportional", (2.0,), NARROW, ((1, -1),)),
    ("quadratic", (0.1, 2.0, -0.05), NARROW, ((1, 0), (1, -1), (1, -2))),
    ("power-law", (0.1, 2.0, 0.8), NARROW, ((1, 0), (1, -0.8), (0, 0))),
    ("quenching", (0.0, 2.0, 0.4), NARROW, ((1, 0), (1, 0), (0, -1))),
    ("saturation", (0.1, 2.0, 1.0), WIDE, ((1, 0), (1, 0), (0, 1))),
    ("saturation", (2.5, -2.0, 1.0), WIDE, ((1, 0), (1, 0), (0, 1))),
    ("squared-saturation", (0.1, 2.0, 1.0), WIDE, ((1, 0), (1, 0), (0, 1))),
    ("first-order", (0.1, 2.0, 1.0), NARROW, ((1, 0), (1, 0), (0, -1))),
    ("first-order", (2.5, -2.0, 1.0), NARROW, ((1, 0), (1, 0), (0, -1))),
    ("4PL", (0.05, 2.5, 1.0, 1.2), WIDE, ((1, 0), (1, 0), (0, 1), (0, 0))),
    ("4PL", (2.5, 0.05, 1.0, 1.2), WIDE, ((1, 0), (1, 0), (0, 1), (0, 0))),
    ("5PL", (0.05, 2.5, 1.0, 1.2, 0.6), WIDE, ((1, 0), (1, 0), (0, 1), (0, 0), (0, 0))),
    ("5PL", (2.5, 0.05, 1.0, 1.2, 1.8), WIDE, ((1, 0), (1, 0), (0, 1), (0, 0), (0, 0))),
]


@pytest.mark.parametrize("concentration_unit", SCALES)
@pytest.mark.parametrize("response_unit", SCALES)
@pytest.mark.parametrize(("model", "truth", "x", "powers"), TRUTHS)
def test_noise_free_standards_are_recovered(
    model: str,
    truth: tuple[float, ...],
    x: np.ndarray,
    powers: tuple[tuple[float, float], ...],
    response_unit: float,
    concentration_unit: float,
) -> None:
    factor = [response_unit**a * concentration_unit**b for a, b in powers]
    expected = np.array(truth) * factor
    x = x * concentration_unit
    curve = calib.fit(x, response_model(model).response(x, expected), model=model)
    assert curve.converged
    np.testing.assert_allclose(curve.values, expected, rtol=1e-6)
    np.testing.assert_allclose(curve.back_calculate().value, x, rtol=1e-8)


def test_noise_free_quenching_keeps_its_offset_at_zero() -> None:
    x = np.array([0.0, 0.5, 1.0, 2.0, 4.0, 8.0])
    curve = calib.fit(x, 100.0 / (1.0 + 0.4 * x), model="quenching")
    assert curve.fixed == {"offset": 0.0}
    np.testing.assert_allclose(curve.values, [0.0, 100.0, 0.4], rtol=1e-9)


def test_bounds_free_the_offset_of_quenching() -> None:
    x = np.array([0.0, 0.5, 1.0, 2.0, 4.0, 8.0])
    y = 3.0 + 100.0 / (1.0 + 0.4 * x)
    curve = calib.fit(x, y, model="quenching", bounds={"offset": (0.0, 50.0)})
    np.testing.assert_allclose(curve.values, [3.0, 100.0, 0.4], rtol=1e-6)


decades = st.floats(-6.0, 6.0)


@settings(max_examples=25, deadline=None, derandomize=True)
@given(decades, decades, st.sampled_from([RISING, FALLING]))
def test_units_do_not_change_the_answer(log_x: float, log_y: float, truth: tuple[float, ...]) -> None:
    x, y = assay_standards(truth)
    k_x, k_y = 10.0**log_x, 10.0**log_y
    unknowns = np.array([0.5, 1.2, 2.0])
    here = calib.fit(x, y, model="4PL").invert(unknowns)
    there = calib.fit(k_x * x, k_y * y, model="4PL").invert(k_y * unknowns)
    for name in ("value", "u", "lower", "upper"):
        np.testing.assert_allclose(getattr(there, name) / k_x, getattr(here, name), rtol=1e-7, err_msg=name)
    assert there.state == here.state


@pytest.mark.parametrize("concentration_unit", [1e-6, 1e6])
@pytest.mark.parametrize("response_unit", [1e-6, 1e6])
@pytest.mark.parametrize(("model", "truth", "x", "powers"), TRUTHS)
def test_units_change_neither_what_is_read_nor_its_limits(
    model: str,
    truth: tuple[float, ...],
    x: np.ndarray,
    powers: object,
    response_unit: float,
    concentration_unit: float,
) -> None:
    mean = response_model(model).response(x, truth)
    span = np.ptp(mean)
    y = mean + 0.01 * span * np.random.default_rng(8).standard_normal(x.size)
    unknowns = mean.min() + np.array([0.3, 0.5, 0.7]) * span
    here = calib.fit(x, y, model=model)
    there = calib.fit(x * concentration_unit, y * response_unit, model=model)
    read, again = here.invert(unknowns), there.invert(unknowns * response_unit)
    assert again.state == read.state
    assert "ok" in read.state
    for name in ("value", "u", "lower", "upper"):
        np.testing.assert_allclose(
            getattr(again, name) / concentration_unit, getattr(read, name), rtol=1e-7, err_msg=name
        )
    back, back_again = here.back_calculate().value, there.back_calculate().value
    np.testing.assert_allclose(back_again / concentration_unit, back, rtol=1e-7, atol=1e-7)


@settings(max_examples=15, deadline=None, derandomize=True)
@given(st.permutations(range(16)), st.sampled_from(["uniform", "relative"]))
def test_the_order_of_readings_does_not_matter(order: list[int], noise: str) -> None:
    x, y = assay_standards()
    here, there = calib.fit(x, y, noise=noise), calib.fit(x[order], y[order], noise=noise)
    np.testing.assert_allclose(there.values, here.values, rtol=1e-8)
    np.testing.assert_allclose(there.covariance, here.covariance, rtol=1e-6, atol=1e-12)
    assert there.residual_sum == pytest.approx(here.residual_sum, rel=1e-10)


def test_rising_and_falling_curves_mirror_each_other() -> None:
    x, y = assay_standards()
    rising, falling = calib.fit(x, y), calib.fit(x, 3.0 - y)
    assert falling.parameters["midpoint"] == pytest.approx(rising.parameters["midpoint"], rel=1e-8)
    assert falling.parameters["slope"] == pytest.approx(rising.parameters["slope"], rel=1e-8)
    assert falling.parameters["zero"] == pytest.approx(3.0 - rising.parameters["zero"], rel=1e-8)
    up, down = rising.invert([1.0]), falling.invert([2.0])
    assert down.lower[0] == pytest.approx(up.lower[0], rel=1e-8)
    assert down.upper[0] == pytest.approx(up.upper[0], rel=1e-8)


@pytest.mark.parametrize("dtype", [np.float32, object])
def test_any_numeric_type_is_taken(dtype: type) -> None:
    x, y = np.array([1, 2, 4, 8], dtype=dtype), np.array([3, 5, 9, 17], dtype=dtype)
    np.testing.assert_allclose(calib.fit(x, y, model="line").values, [1.0, 2.0], rtol=1e-12)
