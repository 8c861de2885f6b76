"""A fit that went badly is a status with findings, not an exception."""

from __future__ import annotations

import numpy as np
import pytest
from made_standards import FALLING, RISING, assay_standards, codes

import calib
from calib.errors import ModelError
from calib.models import response_model


def partial_curve(top: float, truth: tuple[float, ...] = RISING) -> calib.Curve:
    x = np.repeat(np.geomspace(0.4, top, 8), 2)
    y = response_model("4PL").response(x, truth)
    return calib.fit(x, y + np.random.default_rng(2).normal(0.0, 0.02, x.size))


@pytest.mark.parametrize("truth", [RISING, FALLING])
def test_a_full_curve_has_nothing_to_report(truth: tuple[float, ...]) -> None:
    assert calib.fit(*assay_standards(truth)).findings == ()


@pytest.mark.parametrize("truth", [RISING, FALLING])
def test_an_asymptote_out_of_reach_is_reported(truth: tuple[float, ...]) -> None:
    """Highest standard at a third of the midpoint: a fifth of the span is seen."""
    curve = partial_curve(33.0, truth)
    message = next(f.message for f in curve.findings if f.code == "asymptote-not-reached")
    assert "values inside the standards stand" in message


def test_a_fixed_plateau_needs_not_be_reached() -> None:
    x = np.repeat(np.geomspace(1.0, 60.0, 8), 2)
    y = response_model("saturation").response(x, (0.0, 2.0, 100.0))
    y = y + np.random.default_rng(2).normal(0.0, 0.002, x.size)
    held = calib.fit(x, y, model="saturation", fixed={"offset": 0.0, "capacity": 2.0})
    assert "asymptote-not-reached" not in codes(held)


def test_too_few_levels_give_no_curve_but_say_how_many_are_needed() -> None:
    curve = calib.fit([1, 1, 2, 2, 3, 3], [0.1, 0.1, 0.5, 0.5, 0.8, 0.8], model="4PL")
    assert not curve.converged
    assert codes(curve) == {"too-few-levels"}
    assert "3 distinct level(s) for 4 free parameters" in curve.findings[0].message
    assert "measure at least 4" in curve.findings[0].message
    assert np.isnan(curve.values).all()
    assert np.isnan(curve.back_calculate().value).all()
    with pytest.raises(ModelError, match="was not fitted"):
        curve.invert([0.4])


def test_fixing_a_parameter_makes_three_levels_enough() -> None:
    curve = calib.fit([1, 2, 3], [0.2, 0.5, 0.7], model="4PL", fixed={"zero": 0.0})
    assert "too-few-levels" not in codes(curve)


def test_parameters_that_only_count_together_are_not_identifiable() -> None:
    product = calib.custom_model("product", ("a", "b"), lambda x, a, b: a * b * x)
    curve = calib.fit([1, 2, 3, 4], [2.1, 3.9, 6.2, 7.9], model=product, start={"a": 1.0, "b": 1.0})
    assert "not-identifiable" in codes(curve)
    np.testing.assert_allclose(curve.predict([1.0]), [2.01], rtol=0.02)


def test_a_loose_exponent_is_reported() -> None:
    curve = calib.fit([1, 2, 3, 4, 5], [1.0, 1.9, 1.2, 2.2, 1.4], model="power-law")
    assert "not-identifiable" in codes(curve)


def test_as_many_readings_as_parameters_leave_no_uncertainty() -> None:
    curve = calib.fit([1, 2], [2.0, 4.1], model="line")
    assert "no-residual-freedom" in codes(curve)
    assert curve.degrees_of_freedom == 0
    assert np.isnan(curve.residual_sd)
    np.testing.assert_allclose(curve.back_calculate().value, [1.0, 2.0])
    quantity = curve.invert([3.0])
    assert quantity.state == ("no-estimate",)
    assert np.isneginf(quantity.lower).all()
    assert np.isposinf(quantity.upper).all()
    assert np.isnan(quantity.k).all()


def test_a_parabola_that_turns_inside_the_standards_is_reported() -> None:
    x = np.linspace(0.0, 10.0, 11)
    assert "turning-point" in codes(calib.fit(x, 10 * x - x**2, model="quadratic"))
    assert "turning-point" not in codes(calib.fit(x, 25 * x - x**2, model="quadratic"))


def test_a_flat_run_is_no_curve() -> None:
    curve = calib.fit(np.repeat([1.0, 3.0, 10.0, 30.0, 100.0], 2), np.full(10, 0.7), model="4PL")
    assert curve.findings
    assert codes(curve) & {"asymptote-not-reached", "not-identifiable", "not-converged"}


@pytest.mark.parametrize("model", ["4PL", "5PL", "saturation", "first-order", "power-law"])
def test_pure_noise_never_raises(model: str) -> None:
    rng = np.random.default_rng(5)
    x = np.repeat(np.geomspace(0.5, 500.0, 8), 2)
    for _ in range(2):
        curve = calib.fit(x, rng.normal(1.0, 0.1, x.size), model=model)
        assert isinstance(curve.converged, bool)
        assert np.isfinite(curve.values).all()
