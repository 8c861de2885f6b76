"""A user's own formula: derivatives found for it, and what it refuses."""

from __future__ import annotations

import math

import numpy as np
import pytest

import calib
from calib.errors import ModelError

X = np.linspace(0.5, 4.0, 8)
P = (3.0, 0.7)
EXACT = np.stack([np.exp(-0.7 * X), -3.0 * X * np.exp(-0.7 * X)], axis=-1)


def decay(x: np.ndarray, height: float, rate: float) -> np.ndarray:
    return height * np.exp(-rate * x)


def real_decay(x: np.ndarray, height: float, rate: float) -> np.ndarray:
    """Refuses complex numbers, as the functions of `math` do."""
    return np.array([float(height) * math.exp(-float(rate) * float(v)) for v in np.ravel(x)]).reshape(
        np.shape(x)
    )


def dropping_decay(x: np.ndarray, height: float, rate: float) -> np.ndarray:
    """Takes complex numbers and silently drops what makes them so."""
    return np.real(height) * np.exp(-np.real(rate) * x)


def test_gradient_by_complex_step_is_exact() -> None:
    model = calib.custom_model("decay", ("height", "rate"), decay)
    np.testing.assert_allclose(model.gradient(X, P), EXACT, rtol=1e-14)


@pytest.mark.parametrize("function", [real_decay, dropping_decay])
def test_gradient_by_central_differences_where_complex_numbers_do_not_pass(function: object) -> None:
    model = calib.custom_model("decay", ("height", "rate"), function)
    np.testing.assert_allclose(model.gradient(X, P), EXACT, rtol=1e-8)


def test_gradient_given_by_the_user_is_used() -> None:
    model = calib.custom_model("decay", ("height", "rate"), decay, gradient=lambda x, h, r: EXACT * 2.0)
    np.testing.assert_array_equal(model.gradient(X, P), EXACT * 2.0)


def test_slope_in_the_concentration() -> None:
    model = calib.custom_model("decay", ("height", "rate"), decay)
    np.testing.assert_allclose(model.slope(X, P), -2.1 * np.exp(-0.7 * X), rtol=1e-8)


def test_several_columns_are_fitted_but_not_inverted() -> None:
    plane = calib.custom_model("plane", ("a", "b", "c"), lambda x, a, b, c: a + b * x[..., 0] + c * x[..., 1])
    rng = np.random.default_rng(4)
    x = rng.uniform(size=(12, 2))
    curve = calib.fit(x, 1.0 + x @ [2.0, -3.0], model=plane, start={"a": 0.0, "b": 0.0, "c": 0.0})
    np.testing.assert_allclose(curve.values, [1.0, 2.0, -3.0], atol=1e-12)
    with pytest.raises(ModelError, match="several columns"):
        curve.invert([1.0])
    assert np.isnan(curve.back_calculate().value).all()


def test_start_values_are_compulsory() -> None:
    model = calib.custom_model("decay", ("height", "rate"), decay)
    with pytest.raises(ModelError, match=r"needs start values.*height.*rate"):
        calib.fit(X, decay(X, *P), model=model)


@pytest.mark.parametrize("names", [(), ("a", "a"), ("two words",)])
def test_parameter_names_must_be_distinct_plain_names(names: tuple[str, ...]) -> None:
    with pytest.raises(ModelError, match="distinct plain names"):
        calib.custom_model("broken", names, decay)


def test_inverse_without_a_stretch_of_the_axis_is_refused() -> None:
    model = calib.custom_model("decay", ("height", "rate"), decay)
    with pytest.raises(ModelError, match=r"no closed inverse; use Curve\.invert"):
        model.inverse(1.0, P)
