"""Findings about data that fit too well, or not at all; the rules are common practice."""

import numpy as np
import pytest

import calib

X = np.repeat([1.0, 2.0, 4.0, 8.0, 16.0], 2)
CURVED = 10.0 * X / (5.0 + X)


def codes(curve: calib.Curve) -> set[str]:
    return {f.code for f in curve.findings}


@pytest.mark.parametrize("scale", [1e-9, 1.0, 1e9])
def test_readings_on_the_curve_to_the_last_digit_say_so(scale: float) -> None:
    assert "no-scatter" in codes(calib.fit(X, scale * CURVED, model="saturation"))


@pytest.mark.parametrize("scale", [1e-9, 1.0, 1e9])
def test_ordinary_scatter_is_no_finding(scale: float) -> None:
    noisy = CURVED * (1 + 0.01 * np.resize([1.0, -1.0, 2.0], 10))
    assert not codes(calib.fit(X, scale * noisy, model="saturation"))


def test_copied_replicates_say_so() -> None:
    copied = np.repeat([1.70, 2.80, 4.50, 6.20, 7.60], 2)
    assert "identical-replicates" in codes(calib.fit(X, copied, model="saturation"))
    copied[3] += 0.01
    assert "identical-replicates" not in codes(calib.fit(X, copied, model="saturation"))


@pytest.mark.parametrize("model", ["line", "quadratic", "4PL", "saturation", "power-law"])
def test_a_response_that_does_not_change_is_flat(model: str) -> None:
    # The same scatter about the same mean at every level.
    assert "flat" in codes(calib.fit(X, 5.0 + 0.1 * np.resize([1.0, -1.0], 10), model))


def test_a_flat_line_is_found_at_the_rate_of_its_test() -> None:
    rng = np.random.default_rng(5)
    found = [("flat" in codes(calib.fit(X, rng.standard_normal(10), "line"))) for _ in range(400)]
    # 95 % of lines without a slope; four binomial standard errors of 400 runs are 4.4 points.
    assert abs(np.mean(found) - 0.95) < 0.044


def test_an_unknown_inside_is_never_placed_below_for_want_of_limits() -> None:
    x, y = np.array([0.1, 1.0, 4.0, 8.0, 16.0]), np.array([0.2, 1.1, 2.9, 4.2, 5.4])
    curve = calib.fit(x, y, model="5PL", bounds={"asymmetry": (0.2, 5.0)})
    quantity = curve.invert([1.1, 2.9, 4.2])
    assert set(quantity.position) == {"inside"}
    assert set(quantity.state) == {"no-estimate"}


def test_an_undefined_stretch_is_no_second_region() -> None:
    model = calib.custom_model("log", ("a", "b"), lambda x, a, b: a * np.log1p(b * x))
    x = np.array([1.0, 2.0, 4.0, 8.0, 16.0])
    y = 3.0 * np.log1p(0.5 * x) + np.array([0.01, -0.02, 0.015, -0.01, 0.005])
    curve = calib.fit(x, y, model=model, start={"a": 1.0, "b": 1.0})
    assert not curve.invert([2.0, 4.0]).second_region.any()


def test_a_formula_that_fails_is_named() -> None:
    broken = calib.custom_model("broken", ("a",), lambda x, a: 1 / 0)
    with pytest.raises(calib.CalibError, match="model 'broken' fails"):
        calib.fit([1.0, 2.0, 3.0], [1.0, 2.0, 3.0], model=broken, start={"a": 1.0})


def test_a_constant_formula_is_the_same_everywhere() -> None:
    constant = calib.custom_model("constant", ("a",), lambda x, a: a)
    curve = calib.fit([1.0, 2.0, 3.0], [1.0, 2.0, 3.0], model=constant, start={"a": 1.0})
    assert curve.parameters["a"] == pytest.approx(2.0)
