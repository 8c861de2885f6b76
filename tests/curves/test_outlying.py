"""The one reading that does not belong: how often a good one is flagged, and how often a bad one is found."""

from __future__ import annotations

import numpy as np
import pytest
from made_standards import LEVELS, RISING
from scipy.stats import norm
from scipy.stats import t as student

import calib
from calib.curves.outlying import outlying_reading
from calib.curves.robust import robust_fit
from calib.models import response_model
from calib.quantification.robust_check import robust_finding

X = np.repeat(LEVELS, 2)
MEAN = response_model("4PL").response(X, RISING)
SD = 0.04 * MEAN**0.8


def runs(count: int, seed: int = 1) -> np.ndarray:
    return MEAN + SD * np.random.default_rng(seed).standard_normal((count, X.size))


@pytest.fixture(scope="module")
def noise():
    return calib.pool_noise(calib.fit_stack(X, runs(20, seed=3)))


def test_the_limits_are_those_of_the_normal_and_of_t(noise) -> None:
    """z(1 − 0.01/32) = 3.42 for 16 readings; t with n − p − 1 degrees of freedom without a history."""
    y = MEAN.copy()
    y[6] += 15 * SD[6]
    scattered = y + SD * np.random.default_rng(1).standard_normal(X.size)
    found = outlying_reading(calib.fit(X, scattered, noise=noise))
    assert (found.index, found.against) == (6, "the history")
    assert found.limit == pytest.approx(norm.ppf(1 - 0.01 / 32))
    assert found.limit == pytest.approx(3.42, abs=0.005)
    alone = outlying_reading(calib.fit(X, scattered, noise=noise.function))
    assert (alone.index, alone.against) == (6, "the other readings of this run")
    assert alone.limit == pytest.approx(student.ppf(1 - 0.01 / 32, 11))


def test_a_good_run_is_left_alone(noise) -> None:
    """Flagged in 0.9 % of good runs in a large simulation; of 600, 1.5 % is 9 and chance adds 5."""
    flagged = sum(outlying_reading(c) is not None for c in calib.fit_stack(X, runs(600), noise=noise))
    assert flagged <= 14


def test_an_error_of_ten_standard_deviations_is_found_and_no_good_reading_is_lost(noise) -> None:
    y = runs(200, seed=5)
    rng = np.random.default_rng(6)
    which = rng.integers(0, X.size, len(y))
    y[np.arange(len(y)), which] += rng.choice([-10.0, 10.0], len(y)) * SD[which]
    found = [outlying_reading(c) for c in calib.fit_stack(X, y, noise=noise)]
    assert np.mean([f is not None for f in found]) >= 0.98
    assert np.mean([f is None or f.index == i for f, i in zip(found, which, strict=True)]) >= 0.98


def test_intervals_after_leaving_it_out_cover_as_claimed(noise) -> None:
    """94.7 to 95.4 % in a large simulation; here the mean over 3 concentrations of 200 runs."""
    y, at = runs(200, seed=7), np.array([3.0, 30.0, 300.0])
    rng = np.random.default_rng(8)
    which = rng.integers(0, X.size, len(y))
    y[np.arange(len(y)), which] += 10.0 * SD[which]
    inside = []
    for row in y:
        curve = calib.fit(X, row, noise=noise)
        found = outlying_reading(curve)
        if found is not None:
            kept = np.arange(X.size) != found.index
            curve = calib.fit(X[kept], row[kept], noise=noise)
        mean = response_model("4PL").response(at, RISING)
        new = mean + 0.04 * mean**0.8 * rng.standard_normal(at.size)
        lower, upper = curve.prediction_band(at)
        inside.append((lower <= new) & (new <= upper))
    assert np.mean(inside) == pytest.approx(0.95, abs=0.03)


def test_the_last_reading_of_an_end_level_is_told_as_such(noise) -> None:
    x, y = X[1:], runs(1)[0][1:]
    y[0] += 20 * SD[0]
    found = outlying_reading(calib.fit(x, y, noise=noise))
    assert found.index == 0
    assert found.last_of_end_level
    y[0], y[6] = MEAN[1], y[6] + 20 * SD[7]
    assert not outlying_reading(calib.fit(x, y, noise=noise)).last_of_end_level


def test_known_uncertainties_are_a_history_too() -> None:
    y = runs(1, seed=2)[0]
    y[8] -= 12 * SD[8]
    found = outlying_reading(calib.fit(X, y, u=SD))
    assert (found.index, found.against) == (8, "the known standard uncertainties")
    assert found.studentised < 0


# The robust fit.


def test_a_robust_fit_of_good_readings_is_the_fit(noise) -> None:
    """Within half a standard uncertainty of the curve; bisquare is 95 % efficient."""
    curve = calib.fit(X, runs(1, seed=4)[0], noise=noise)
    at = np.array([3.0, 30.0, 300.0])
    difference = robust_fit(curve).predict(at) - curve.predict(at)
    assert np.all(np.abs(difference) < 0.7 * np.sqrt(curve.fit_variance(at)))
    assert robust_finding(curve) is None


def test_a_robust_fit_is_hardly_moved_by_a_gross_error(noise) -> None:
    good = runs(1, seed=4)[0]
    bad = good.copy()
    bad[8] += 30 * SD[8]
    clean, pulled = calib.fit(X, good, noise=noise), calib.fit(X, bad, noise=noise)
    kept = np.arange(X.size) != 8
    without = calib.fit(X[kept], good[kept], noise=noise)
    np.testing.assert_allclose(robust_fit(pulled).predict(X), without.predict(X), rtol=0.02)
    assert abs(robust_fit(pulled).predict(37.0) - clean.predict(37.0)) < abs(
        pulled.predict(37.0) - clean.predict(37.0)
    )
    assert "single readings pull the curve" in robust_finding(pulled).message


def test_readings_without_scatter_have_no_robust_fit() -> None:
    assert robust_fit(calib.fit([1.0, 2.0, 3.0, 4.0], [2.0, 4.0, 6.0, 8.0], model="line")) is None
