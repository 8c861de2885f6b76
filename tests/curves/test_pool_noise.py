"""A noise model pooled over a history of runs: what it finds, and what it is worth."""

from __future__ import annotations

from functools import cache

import numpy as np
import pytest
from made_standards import LEVELS, RISING, assay_standards, codes
from scipy.optimize import brentq, curve_fit, minimize_scalar
from scipy.special import digamma, polygamma
from scipy.stats import chi2

import calib
from calib.curves.history_noise import HistoryNoise
from calib.curves.moderated_variance import ModeratedVariance, moderated_variance
from calib.curves.noise import AdditiveRelativeNoise, PowerOfMeanNoise, noise_from_dict
from calib.errors import InputError, MethodError
from calib.models import response_model

X = np.repeat(LEVELS, 2)
MEAN = response_model("4PL").response(X, RISING)
TRUTHS = {
    "power": lambda mean: 0.04 * mean**0.8,
    "two parts": lambda mean: np.hypot(0.008, 0.04 * mean),
}


def history(runs: int, sd=TRUTHS["power"], seed: int = 1, x: np.ndarray = X):
    mean = response_model("4PL").response(x, RISING)
    return calib.fit_stack(
        x, mean + sd(mean) * np.random.default_rng(seed).standard_normal((runs, mean.size))
    )


@cache
def laboratories(truth: str) -> tuple[HistoryNoise, ...]:
    """Pooled noise of thirty laboratories with twenty runs each."""
    return tuple(calib.pool_noise(history(20, TRUTHS[truth], seed)) for seed in range(30))


def next_run(seed: int = 9) -> np.ndarray:
    return MEAN + TRUTHS["power"](MEAN) * np.random.default_rng(seed).standard_normal(X.size)


def logistic(x, zero, infinite, midpoint, slope):
    return infinite + (zero - infinite) / (1.0 + (x / midpoint) ** slope)


def independent_exponent(runs: np.ndarray) -> float:
    """Exponent of the mean by pseudo-likelihood, with SciPy's curve_fit and its own reweighting."""
    theta = 0.7
    for _ in range(6):
        residual, mean, leverage = [], [], []
        for y in runs:
            p = list(RISING)
            for _ in range(12):
                weight = np.abs(logistic(X, *p)) ** -theta
                p, _ = curve_fit(logistic, X, y, p0=p, sigma=1.0 / weight, xtol=1e-12, ftol=1e-12)
            steps = 1e-6 * np.abs(p)
            j = np.stack(
                [(logistic(X, *(p + d)) - logistic(X, *(p - d))) / (2 * d.sum()) for d in np.diag(steps)],
                axis=1,
            )
            q, _ = np.linalg.qr(j * weight[:, None])
            residual.append(y - logistic(X, *p))
            mean.append(logistic(X, *p))
            leverage.append(np.sum(q**2, axis=1))
        r, mu, h = np.concatenate(residual), np.concatenate(mean), np.concatenate(leverage)

        def criterion(t: float, r=r, mu=mu, h=h) -> float:
            g = np.maximum(mu, 1e-3 * np.ptp(mu)) ** (2 * t)
            return r.size * np.log(np.mean(r**2 / ((1 - h) * g))) + np.log(g).sum()

        theta = minimize_scalar(criterion, bounds=(-0.2, 2.0), method="bounded", options={"xatol": 1e-9}).x
    return 2.0 * theta


def test_the_exponent_is_that_of_an_independent_computation() -> None:
    runs = MEAN + TRUTHS["power"](MEAN) * np.random.default_rng(3).standard_normal((6, X.size))
    noise = calib.pool_noise(calib.fit_stack(X, runs))
    assert noise.family == "power-of-mean"
    assert noise.function.exponent == pytest.approx(independent_exponent(runs), abs=2e-3)


def test_the_exponent_is_found_without_bias_and_nearly_the_same_by_every_laboratory() -> None:
    """sd = 0.04·mean^0.8: bias of theta at most 0.02 and its scatter at most 0.04 from 20 runs."""
    functions = [noise.function for noise in laboratories("power")]
    theta = [f.exponent / 2 for f in functions if isinstance(f, PowerOfMeanNoise)]
    assert abs(np.mean(theta) - 0.8) <= 0.02
    assert np.std(theta) <= 0.04


@pytest.mark.parametrize("truth", TRUTHS)
def test_the_family_is_the_true_one_nine_times_in_ten(truth: str) -> None:
    """91 to 95 % in a large simulation; chance leaves 23 of thirty laboratories at 2.5 sigma."""
    right = {"power": "power-of-mean", "two parts": "additive-relative"}[truth]
    assert [noise.family for noise in laboratories(truth)].count(right) >= 23


def test_runs_of_other_levels_are_pooled_together() -> None:
    """Half of the runs have three readings a level, and one of its own lacks a level."""
    more = history(4, seed=5, x=np.repeat(LEVELS, 3))
    fewer = history(4, seed=6, x=np.repeat(LEVELS[1:], 2))
    noise = calib.pool_noise([*more, *fewer])
    assert noise.runs == 8
    assert noise.readings == 4 * 24 + 4 * 14
    assert noise.spread.degrees_of_freedom == 4 * 20 + 4 * 10


def test_the_last_fifty_runs_count() -> None:
    runs = list(history(60))
    noise = calib.pool_noise(runs)
    assert noise.runs == 50
    assert noise == calib.pool_noise(runs[10:])


def test_a_curve_rests_on_the_moderated_scatter_and_its_degrees_of_freedom() -> None:
    noise = calib.pool_noise(history(20))
    x, y = X, next_run()
    curve = calib.fit(x, y, noise=noise)
    d0, s0, s = noise.spread.weight, noise.spread.sd, curve.residual_sd
    assert curve.scale**2 == pytest.approx((d0 * s0**2 + 12 * s**2) / (d0 + 12), rel=1e-12)
    assert curve.coverage_freedom == pytest.approx(d0 + 12)
    plain = calib.fit(x, y, noise=noise.function)
    np.testing.assert_allclose(curve.values, plain.values, rtol=1e-9)
    np.testing.assert_allclose(
        curve.covariance, plain.covariance * (curve.scale / plain.scale) ** 2, rtol=1e-9
    )


def test_a_stack_rests_on_it_too() -> None:
    noise = calib.pool_noise(history(20))
    stack = calib.fit_stack(X, [next_run(1), next_run(2)], noise=noise)
    for i in (0, 1):
        np.testing.assert_allclose(stack.covariance[i], stack[i].covariance, rtol=1e-6)
        assert stack[i].coverage_freedom > 12


def test_a_run_without_freedom_of_its_own_has_the_intervals_of_its_history() -> None:
    noise = calib.pool_noise(history(20))
    x = LEVELS[[0, 3, 5, 7]]
    curve = calib.fit(x, response_model("4PL").response(x, RISING) * [1.01, 0.99, 1.02, 1.0], noise=noise)
    assert curve.scale == pytest.approx(noise.spread.sd)
    assert curve.coverage_freedom == noise.spread.weight
    assert curve.invert([1.0]).state == ("ok",)


def test_a_history_of_fewer_than_five_runs_says_what_its_intervals_are_worth() -> None:
    x, y = assay_standards()
    few = calib.fit(x, y, noise=calib.pool_noise(history(4)))
    assert "variance-from-few-runs" in codes(few)
    (message,) = [f.message for f in few.findings if f.code == "variance-from-few-runs"]
    assert message == "variance function from 4 runs: nominal 95 % intervals cover about 89–95 %"
    assert "variance-from-few-runs" not in codes(calib.fit(x, y, noise=calib.pool_noise(history(5))))


def test_a_pooled_model_survives_the_record() -> None:
    for seed in range(4):
        noise = calib.pool_noise(history(6, TRUTHS["two parts"], seed))
        again = noise_from_dict(noise.to_dict())
        assert again == noise
        assert isinstance(again, HistoryNoise)


def test_the_order_of_the_readings_of_a_run_does_not_matter() -> None:
    rng = np.random.default_rng(2)
    y = MEAN + TRUTHS["power"](MEAN) * rng.standard_normal((20, X.size))
    shuffled = [calib.fit(X[o], row[o]) for row, o in ((r, rng.permutation(X.size)) for r in y)]
    one, other = calib.pool_noise(calib.fit_stack(X, y)), calib.pool_noise(shuffled)
    g, h = one.variance(MEAN, X), other.variance(MEAN, X)
    np.testing.assert_allclose(g / g[0], h / h[0], rtol=1e-6)
    assert one.spread.sd == pytest.approx(other.spread.sd, rel=1e-6)


@pytest.mark.parametrize("factor", [1e-3, 1e4])
def test_another_unit_of_the_response_changes_only_the_scale(factor: float) -> None:
    y = MEAN + TRUTHS["power"](MEAN) * np.random.default_rng(4).standard_normal((10, X.size))
    one, other = (calib.pool_noise(calib.fit_stack(X, y * f)) for f in (1.0, factor))
    exponent = one.function.exponent
    assert other.function.exponent == pytest.approx(exponent, abs=1e-6)
    assert other.spread.sd == pytest.approx(one.spread.sd * factor ** (1 - exponent / 2), rel=1e-5)
    assert other.spread.weight == pytest.approx(one.spread.weight, rel=1e-6)


def test_nothing_to_pool_is_refused_in_words() -> None:
    x = np.array([1.0, 10.0, 100.0, 1000.0])
    exact = calib.fit(x, [0.1, 0.4, 1.2, 2.3])
    with pytest.raises(InputError, match=r"none of 1 curves can be pooled.*give accepted runs"):
        calib.pool_noise([exact])
    with pytest.raises(InputError, match="none of 0 curves"):
        calib.pool_noise([])


def test_history_is_no_name_for_a_single_fit() -> None:
    with pytest.raises(MethodError, match=r"calib\.pool_noise"):
        calib.fit(*assay_standards(), noise="history")


# The moderated variance.


def test_the_weight_solves_the_equation_of_moments() -> None:
    """trigamma(d0/2) is the variance of ln s² beyond that of chi-square (Smyth 2004, section 6, from memory)."""
    rng = np.random.default_rng(8)
    d = rng.integers(4, 21, 200).astype(float)
    s2 = 0.03**2 * rng.chisquare(d) / d * 6.0 / rng.chisquare(6.0, d.size)
    found = moderated_variance(s2, d)
    e = np.log(s2) - digamma(d / 2) + np.log(d / 2)
    excess = e.var(ddof=1) - polygamma(1, d / 2).mean()
    weight = 2.0 * brentq(lambda h: polygamma(1, h) - excess, 1e-3, 1e4, xtol=1e-12)
    assert found.weight == pytest.approx(weight, rel=1e-8)
    assert 4.0 < found.weight < 9.0
    assert found.sd == pytest.approx(0.03, rel=0.1)


def test_runs_that_differ_by_chance_alone_count_in_full() -> None:
    """Variances at evenly spaced quantiles of chi-square differ a little less than by chance."""
    s2 = chi2.ppf((np.arange(20) + 0.5) / 20, 12) / 12
    found = moderated_variance(s2, np.full(20, 12.0))
    assert found.weight == found.degrees_of_freedom == 240.0
    assert found.sd**2 == pytest.approx(s2.mean())


def test_one_run_counts_as_itself() -> None:
    assert moderated_variance([0.04], [12.0]) == ModeratedVariance(0.2, 12.0, 12.0)


def flagged(factor: float, runs: int = 2000) -> float:
    """Share of runs with standard deviation times ``factor`` that are called noisy."""
    spread = moderated_variance(chi2.ppf((np.arange(20) + 0.5) / 20, 12) / 12, np.full(20, 12.0))
    s2 = factor**2 * np.random.default_rng(5).chisquare(12, runs) / 12
    return float(spread.is_noisy(s2, np.full(runs, 12)).mean())


@pytest.mark.parametrize(
    ("factor", "low", "high"), [(1.0, 0.004, 0.015), (1.5, 0.35, 0.55), (2.0, 0.80, 0.93), (2.5, 0.95, 1.0)]
)
def test_a_noisy_run_is_flagged_as_often_as_stated(factor: float, low: float, high: float) -> None:
    assert low <= flagged(factor) <= high


def test_a_noisy_run_keeps_its_own_scatter_and_says_so() -> None:
    noise = calib.pool_noise(history(20))
    rng = np.random.default_rng(1)
    noisy = calib.fit(X, MEAN + 3.0 * TRUTHS["power"](MEAN) * rng.standard_normal(X.size), noise=noise)
    (message,) = [f.message for f in noisy.findings if f.code == "noisy-run"]
    assert message.startswith("noisy run: residual SD")
    assert noisy.scale == pytest.approx(noisy.residual_sd)
    assert noisy.coverage_freedom == 12
    clean = calib.fit(X, MEAN + TRUTHS["power"](MEAN) * rng.standard_normal(X.size), noise=noise)
    assert "noisy-run" not in codes(clean)


def test_where_runs_differ_among_themselves_more_clean_ones_are_flagged_and_the_share_is_told() -> None:
    """19 % at d0 = 5, 10 % at 10, 5 % at 20, 1 % at the full weight, by simulation."""
    for weight, share in ((5.0, 0.19), (10.0, 0.10), (20.0, 0.05), (240.0, 0.01)):
        spread = ModeratedVariance(1.0, weight, 240.0)
        assert spread.flagged_when_clean(12) == pytest.approx(share, abs=0.012)


def test_constant_noise_is_found_whichever_family_describes_it() -> None:
    noise = calib.pool_noise(history(20, lambda mean: np.full_like(mean, 0.03)))
    g = noise.variance(np.array([0.1, 2.0]), np.ones(2))
    assert g[1] / g[0] == pytest.approx(1.0, abs=0.5)
    assert isinstance(noise.function, PowerOfMeanNoise | AdditiveRelativeNoise)
