"""Curve shape: published figures, and for each criterion a pair of runs just inside and just outside."""

import math

import numpy as np
import pytest
from made_evidence import evidence, limits, standard
from scipy.special import fdtrc, fdtri

import calib
from calib.acceptance import criteria_from, judge
from calib.acceptance.shape_criteria import residual_sum


def result(key, standards, limit, **changes):
    verdict = judge(evidence(standards, **changes), criteria_from(limits(relative_error=9.0, **{key: limit})))
    return next(r for r in verdict.criteria if r.id == key)


def pair(key, standards, observed, **changes):
    """The answers at a limit just above and just below what is observed."""
    return [result(key, standards, observed * f, **changes) for f in (1 - 1e-6, 1 + 1e-6)]


def points(x, y, fitted=None, variance=None):
    fitted = y if fitted is None else fitted
    variance = np.ones(len(x)) if variance is None else variance
    return [
        standard(a, response=b, fitted_response=c, variance=v)
        for a, b, c, v in zip(x, y, fitted, variance, strict=True)
    ]


# Line against quadratic. Calculated with scipy 1.17.1 for this laboratory's test vectors.
X, Y = (1.0, 2.0, 4.0, 6.0, 8.0, 10.0), (0.105, 0.205, 0.398, 0.580, 0.752, 0.911)


def test_the_linearity_test_finds_the_curvature_that_r_squared_hides():
    answer = result("mandel_linearity", points(X, Y), 0.01, model="line")
    assert not answer.passed
    # PG 2296.9 against F(0.99; 1, 3) = 34.116, though r2 of the line is 0.9985.
    assert "PG = 2296.9" in answer.detail
    assert fdtri(1, 3, 0.99) == pytest.approx(34.116, abs=5e-4)
    assert math.sqrt(residual_sum(points(X, Y), 1) / 4) == pytest.approx(0.0133936, abs=5e-8)
    assert math.sqrt(residual_sum(points(X, Y), 2) / 3) == pytest.approx(0.00055856, abs=5e-9)
    curve = calib.fit(X, Y, model="line")
    assert curve.r_squared == pytest.approx(0.9985, abs=5e-5)
    assert (
        judge(
            evidence(points(X, Y), r_squared=curve.r_squared),
            criteria_from(limits(relative_error=9.0, r_squared=0.99)),
        ).decision
        == "accepted"
    )


def test_ten_photometric_levels_of_the_standard_are_straight():
    # ISO 8466-1:1990, clause 5 example (the ten pairs from memory; no printed result): F(0.99; 1, 7) = 12.25.
    y = (0.14, 0.281, 0.405, 0.535, 0.662, 0.789, 0.916, 1.058, 1.173, 1.303)
    answer = result("mandel_linearity", points(np.arange(1, 11) / 20, y), 0.01, model="line")
    assert answer.passed
    assert fdtri(1, 7, 0.99) == pytest.approx(12.25, abs=0.005)


def test_the_linearity_test_agrees_with_the_extra_sum_of_squares():
    """F of line against quadratic is (b2/sd(b2))², for any data."""
    rng = np.random.default_rng(7)
    x = np.repeat(np.arange(1.0, 7.0), 2)
    y = 3 + 2 * x + 0.02 * x**2 + rng.normal(0, 0.05, x.size)
    curve = calib.fit(x, y, model="quadratic")
    t = curve.parameters["curvature"] / curve.standard_errors["curvature"]
    answer = result("mandel_linearity", points(x, y), 0.01, model="line")
    assert answer.observed == pytest.approx(float(fdtrc(1, 9, t**2)), rel=1e-6)


@pytest.mark.parametrize("inside", [True, False])
def test_just_inside_and_just_outside_the_linearity_limit(inside):
    x = np.repeat(np.arange(1.0, 7.0), 2)
    y = 2 * x + 0.01 * x**2 + np.tile([0.03, -0.03], 6)
    observed = result("mandel_linearity", points(x, y), 0.5, model="line").observed
    assert pair("mandel_linearity", points(x, y), observed, model="line")[not inside].passed is inside


def test_a_curve_that_is_no_line_has_no_linearity_to_judge():
    answer = result("mandel_linearity", points(X, Y), 0.01, model="4PL")
    assert (answer.passed, answer.observed) == (True, None)


# Lack of fit.


def lack_data():
    x = np.repeat([1.0, 2.0, 3.0, 4.0, 5.0], 2)
    y = 2 * x + np.array([0.1, -0.1] * 5) + np.repeat([0.0, 0.1, -0.2, 0.1, 0.0], 2)
    slope, intercept = np.polyfit(x, y, 1)
    return x, y, intercept + slope * x


def test_lack_of_fit_is_the_ratio_of_mean_squares():
    x, y, fitted = lack_data()
    means = np.repeat(y.reshape(5, 2).mean(axis=1), 2)
    f = (np.sum((means - fitted) ** 2) / 3) / (np.sum((y - means) ** 2) / 5)
    answer = result("lack_of_fit", points(x, y, fitted), 0.01)
    assert answer.observed == pytest.approx(float(fdtrc(3, 5, f)), rel=1e-12)


@pytest.mark.parametrize("inside", [True, False])
def test_just_inside_and_just_outside_the_lack_of_fit_limit(inside):
    data = points(*lack_data())
    observed = result("lack_of_fit", data, 0.01).observed
    assert pair("lack_of_fit", data, observed)[not inside].passed is inside


def test_lack_of_fit_needs_replicates():
    answer = result("lack_of_fit", points(X, Y), 0.01)
    assert (answer.passed, answer.observed) == (True, None)


def test_a_weighted_fit_has_its_lack_of_fit_in_weighted_sums():
    x, y, fitted = lack_data()
    halved = result("lack_of_fit", points(x, y, fitted, np.full(10, 0.25)), 0.01)
    assert halved.observed == pytest.approx(result("lack_of_fit", points(x, y, fitted), 0.01).observed)


# Equal variances at the end levels.


def spread(low, high, n=10):
    wobble = np.tile([1.0, -1.0], n // 2)
    x = np.repeat([1.0, 5.0, 10.0], [n, 1, n])
    return points(x, np.concatenate([10 + low * wobble, [50], 100 + high * wobble]))


def test_ten_readings_at_either_end_are_judged_by_the_printed_quantile():
    # ISO 8466-1:1990, 4.1: F(0.99; 9, 9) = 5.35 (from memory; calculated here).
    assert fdtri(9, 9, 0.99) == pytest.approx(5.35, abs=0.005)
    assert result("variance_homogeneity", spread(1, math.sqrt(5.35)), 0.01).passed
    assert not result("variance_homogeneity", spread(1, math.sqrt(5.36)), 0.01).passed
    assert not result("variance_homogeneity", spread(math.sqrt(5.36), 1), 0.01).passed


def test_variances_are_compared_as_the_noise_model_expects_them():
    wide = [standard(s.level, response=s.response, variance=s.level**2) for s in spread(1, 10)]
    assert result("variance_homogeneity", wide, 0.01).passed


# Response factors, r², slope and top of the range.


def test_response_factors_are_judged_by_their_spread():
    factors = np.array([9.0, 10.0, 11.0, 10.0])
    levels = np.array([1.0, 2.0, 5.0, 10.0])
    data = points(levels, factors * levels)
    observed = factors.std(ddof=1) / 10
    inside, outside = pair("response_factor_rsd", data, observed, model="proportional")
    # The limit is an upper one: it is not kept when it is the smaller of the two.
    assert (inside.passed, outside.passed) == (False, True)
    assert outside.observed == pytest.approx(observed)
    assert result("response_factor_rsd", data, 0.0, model="line").observed is None


def test_r_squared_just_inside_and_just_outside():
    inside, outside = pair("r_squared", points(X, Y), 0.99, r_squared=0.99)
    assert (inside.passed, outside.passed) == (True, False)
    assert not result("r_squared", points(X, Y), 0.99, r_squared=math.nan).passed


def test_a_quadratic_must_not_bend_away_saturation():
    inside, outside = pair("top_slope", points(X, Y), 0.5, model="quadratic", end_slopes=(2.0, 1.0))
    assert (inside.passed, outside.passed) == (True, False)
    assert not result("top_slope", points(X, Y), 0.1, model="quadratic", end_slopes=(2.0, -0.5)).passed
    assert result("top_slope", points(X, Y), 0.5, model="saturation", end_slopes=(2.0, 0.1)).passed


@pytest.mark.parametrize(("model", "offset"), [("line", 3.0), ("proportional", 0.0)])
def test_the_top_of_the_range_is_compared_with_the_line_through_the_lower_levels(model, offset):
    x = np.array([1.0, 2.0, 4.0, 10.0])
    y = offset + 2 * x * np.array([1, 1, 1, 0.9])
    inside, outside = pair("top_of_range", points(x, y), 0.9, model=model)
    assert (inside.passed, outside.passed) == (True, False)
    assert inside.observed == pytest.approx(0.9, rel=1e-12)
