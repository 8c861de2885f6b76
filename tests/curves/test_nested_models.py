"""Nested models over a history: the sums of a reference library, the size and the power of the pooled test."""

import numpy as np
import pytest
from nested_power import power
from scipy.stats import f as f_distribution

import calib
from calib.curves.nested_models import FEWEST_RUNS, NESTINGS, compare_nested, nestings_of
from calib.curves.noise import assumed_noise
from calib.errors import InputError
from calib.models import response_model

X = np.repeat([1.0, 2.0, 4.0, 6.0, 8.0, 10.0], 2)
(LINE,) = nestings_of("line")[:1]
UNIFORM = assumed_noise("response", 0.0)


def lines(runs: int, curvature: float, rng: np.random.Generator) -> np.ndarray:
    return 2.0 + 5.0 * X + curvature * X**2 + 0.1 * rng.standard_normal((runs, X.size))


def compared(y: np.ndarray):
    return compare_nested(calib.fit_stack(X, y, "line"), LINE, UNIFORM)


def test_the_pooled_tests_are_those_of_least_squares_by_hand() -> None:
    y = lines(7, 0.004, np.random.default_rng(1))
    sums = [sum(float(np.linalg.lstsq(np.vander(X, k), run, rcond=None)[1][0]) for run in y) for k in (2, 3)]
    pure = sum(
        float(np.sum((run.reshape(-1, 2) - run.reshape(-1, 2).mean(1, keepdims=True)) ** 2)) for run in y
    )
    found = compared(y)
    ratio = (sums[0] - sums[1]) / 7 / (sums[1] / (7 * 9))
    assert found.nested.ratio == pytest.approx(ratio, rel=1e-8)
    assert (found.nested.numerator, found.nested.denominator) == (7, 63)
    assert found.nested.p == pytest.approx(f_distribution.sf(ratio, 7, 63), rel=1e-10)
    assert found.lack_of_fit is not None
    assert found.lack_of_fit.ratio == pytest.approx((sums[0] - pure) / (7 * 4) / (pure / (7 * 6)), rel=1e-8)
    # AICc = n ln(SS/n) + 2k + 2k(k+1)/(n-k-1), k parameters and one variance (Hurvich and Tsai 1989, from memory).
    n = 7 * 12
    aicc = [
        n * np.log(s / n) + 2 * k + 2 * k * (k + 1) / (n - k - 1) for s, k in zip(sums, (15, 22), strict=True)
    ]
    assert found.aicc_difference == pytest.approx(aicc[0] - aicc[1], abs=1e-6)


def test_the_bias_is_that_of_a_line_through_the_parabola() -> None:
    y = np.tile(2.0 + 5.0 * X + 0.05 * X**2, (6, 1)) + 1e-9 * np.random.default_rng(0).standard_normal(
        (6, X.size)
    )
    found = compared(y)
    slope, intercept = np.polyfit(X, y[0], 1)
    x = found.concentration
    expected = (2.0 + 5.0 * x + 0.05 * x**2 - intercept) / slope / x - 1.0
    np.testing.assert_allclose(found.bias, expected, atol=1e-7)
    assert found.worst_bias(1.0, 10.0) == pytest.approx(np.abs(expected).max(), rel=1e-6)
    assert found.worst_bias(3.9, 4.1) < found.worst_bias(1.0, 10.0)
    assert np.isnan(found.worst_bias(20.0, 30.0))


def test_the_size_of_the_pooled_test_is_what_it_says() -> None:
    rng = np.random.default_rng(3)
    p = np.array([compared(lines(FEWEST_RUNS, 0.0, rng)).nested.p for _ in range(100)])
    # 100 histories: the standard error at 5 % is 2.2 %.
    assert np.mean(p < 0.05) <= 0.12
    assert 0.4 <= np.mean(p) <= 0.6


def test_ten_runs_tell_a_curve_of_asymmetry_2_from_a_4pl() -> None:
    found = power(2.0, histories=6)
    assert found.at_5 >= 5 / 6
    assert found.worst_bias > 0.10


def test_runs_of_other_lengths_and_orders_share_a_comparison() -> None:
    y = lines(8, 0.03, np.random.default_rng(4))
    order = np.random.default_rng(5).permutation(X.size)
    curves = [
        calib.fit(X[order] if i % 2 else X[:-1], run[order] if i % 2 else run[:-1], "line")
        for i, run in enumerate(y)
    ]
    found = compare_nested(curves, LINE, UNIFORM)
    y[::2, -1] = np.nan
    assert found.readings == 8 * 12 - 4
    assert found.nested.ratio == pytest.approx(compared(y).nested.ratio, rel=1e-9)


def test_too_few_runs_are_refused() -> None:
    with pytest.raises(InputError, match="at least 6"):
        compared(lines(5, 0.0, np.random.default_rng(6)))


SAMPLE = {
    "proportional": (5.0,),
    "line": (2.0, 5.0),
    "saturation": (0.1, 2.0, 4.0),
    "squared-saturation": (0.1, 2.0, 4.0),
    "quenching": (0.3, 2.0, 0.25),
    "4PL": (0.1, 2.0, 4.0, 1.3),
}


@pytest.mark.parametrize("nesting", NESTINGS, ids=lambda n: f"{n.smaller} in {n.larger}")
def test_the_larger_model_contains_the_smaller_and_names_keep_their_meaning(nesting) -> None:
    p = SAMPLE[nesting.smaller]
    y = response_model(nesting.smaller).response(X, p)
    larger = calib.fit(X, y, nesting.larger)
    np.testing.assert_allclose(larger.predict(X), y, rtol=1e-5)
    values = dict(zip(response_model(nesting.smaller).names, p, strict=True))
    for small, large in nesting.names.items():
        fixed = calib.fit(X, y, nesting.larger, fixed={large: values[small]})
        np.testing.assert_allclose(fixed.predict(X), y, rtol=1e-5)
