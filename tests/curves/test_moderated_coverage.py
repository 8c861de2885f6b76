"""What the moderated variance is worth: coverage of t intervals, and the point estimates behind them.

Where only the variance matters, runs are drawn as variances: s² is σ²·χ²(d)/d, and the variance σ² of a
run is that of the laboratory, or differs between runs as s₀²·d₀/χ²(d₀).
"""

from __future__ import annotations

import numpy as np
import pytest
from made_standards import LEVELS, RISING
from scipy.stats import t as student

import calib
from calib.curves.moderated_variance import moderated_variance
from calib.models import response_model
from calib.quantification.inverse import concentration_of

D = 12.0
LABORATORIES, NEXT = 400, 20


def drawn(weight: float, history: int, factor: float = 1.0, seed: int = 1):
    """For each new run: deviate of a reading, own s², moderated s² and its freedom."""
    rng = np.random.default_rng(seed)

    def spread(*shape: int) -> np.ndarray:
        return np.ones(shape) if np.isinf(weight) else weight / rng.chisquare(weight, shape)

    rows = []
    for _ in range(LABORATORIES):
        past = moderated_variance(spread(history) * rng.chisquare(D, history) / D, np.full(history, D))
        sigma2 = factor**2 * spread(NEXT)
        own = sigma2 * rng.chisquare(D, NEXT) / D
        moderated, nu = past.moderated(own, np.full(NEXT, D))
        rows.append((np.sqrt(sigma2) * rng.standard_normal(NEXT), own, moderated, nu))
    return tuple(np.concatenate(part) for part in zip(*rows, strict=True))


def coverage(deviate: np.ndarray, variance: np.ndarray, nu: np.ndarray) -> float:
    return float(np.mean(np.abs(deviate) <= student.ppf(0.975, nu) * np.sqrt(variance)))


@pytest.mark.parametrize("weight", [5.0, 10.0, 30.0, np.inf])
def test_intervals_cover_whether_or_not_runs_differ_among_themselves(weight: float) -> None:
    """94 to 96 % from ten past runs; standard error of 8000 draws 0.25 points."""
    deviate, _, moderated, nu = drawn(weight, history=10)
    assert 0.934 <= coverage(deviate, moderated, nu) <= 0.966


def test_intervals_are_shorter_than_those_of_the_run_alone() -> None:
    """By 8 % where all runs have one variance and ten past ones are known."""
    _, own, moderated, nu = drawn(np.inf, history=10)
    alone = np.mean(student.ppf(0.975, D) * np.sqrt(own))
    together = np.mean(student.ppf(0.975, nu) * np.sqrt(moderated))
    assert together / alone == pytest.approx(0.92, abs=0.03)


def test_five_past_runs_nearly_do() -> None:
    deviate, _, moderated, nu = drawn(np.inf, history=5)
    assert coverage(deviate, moderated, nu) >= 0.93


def test_a_run_that_scatters_twice_as_much_covers_nearly_as_claimed() -> None:
    """93 % with the switch to its own scatter; 71 % without."""
    deviate, _, moderated, nu = drawn(np.inf, history=20, factor=2.0)
    assert coverage(deviate, moderated, nu) >= 0.91
    history = np.ones_like(moderated)
    assert coverage(deviate, history, np.full_like(nu, 240.0)) < 0.75


@pytest.mark.parametrize(
    "truth", [lambda m: 0.04 * m**0.8, lambda m: np.full_like(m, 0.03), lambda m: 0.05 * m]
)
def test_pooled_weights_read_as_well_as_the_true_ones(truth) -> None:
    """Median bias at most 1 %, to which chance adds 2 % with 400 runs; the same scatter within 6 %."""
    x = np.repeat(LEVELS, 2)
    model = response_model("4PL")
    mean = model.response(x, RISING)
    rng = np.random.default_rng(4)
    noise = calib.pool_noise(calib.fit_stack(x, mean + truth(mean) * rng.standard_normal((20, x.size))))
    y = mean + truth(mean) * rng.standard_normal((400, x.size))
    at = np.array([10.0, 30.0, 100.0, 300.0])
    new = model.response(at, RISING)
    response = new + truth(new) * rng.standard_normal((400, at.size))
    pooled, true = (
        np.array([concentration_of(c, r) for c, r in zip(stack, response, strict=True)]) / at - 1.0
        for stack in (calib.fit_stack(x, y, noise=noise), calib.fit_stack(x, y, relative_sd=truth(mean)))
    )
    assert np.abs(np.nanmedian(pooled, axis=0)).max() <= 0.03
    quartiles = [np.subtract(*np.nanpercentile(v, [75, 25], axis=0)) for v in (pooled, true)]
    np.testing.assert_allclose(quartiles[0], quartiles[1], rtol=0.06)
