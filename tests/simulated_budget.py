"""Simulation of combined intervals: a rising 4PL, eight levels, runs that differ from each other.

The truth is invented. Noise is sd(y) = 0.04·μ^0.8, assumed as such. Each run answers a sample with a
relative deviation of its own (sd ``s_b``), which its checks share and its standards do not show.
"""

from __future__ import annotations

import numpy as np

import calib
from calib.curves.stack import fit_stack
from calib.quantification.between_run import between_runs, checked_run, curve_scatter
from calib.quantification.inverse import concentration_of

TRUTH = np.array([0.05, 2.5, 100.0, 1.2])
LEVELS = np.repeat(1000.0 / 3.0 ** np.arange(7, -1, -1), 2)
CHECKS = np.array([10.0, 50.0, 200.0])
REPLICATES = 3


def response(x, p=TRUTH):
    a, d, c, b = p
    return d + (a - d) / (1.0 + (x / c) ** b)


def noisy(mean, rng, replicates=1):
    return mean + 0.04 * np.abs(mean) ** 0.8 * rng.standard_normal(mean.shape) / np.sqrt(replicates)


def noise():
    return calib.assumed_noise(of="response", exponent=1.6)


def coverage_of_budget(*, s_b, past, trials, seed, x=50.0):
    """Share of combined and of curve-only intervals that contain the truth."""
    rng = np.random.default_rng(seed)
    runs = past + 1
    y = noisy(np.broadcast_to(response(LEVELS), (trials * runs, LEVELS.size)), rng)
    curves = fit_stack(LEVELS, y, model="4PL", noise=noise())
    hit = np.zeros(2)
    for trial in range(trials):
        history = []
        for k in range(past):
            curve = curves[trial * runs + k]
            shift = np.exp(s_b * rng.standard_normal())
            found = concentration_of(curve, noisy(response(CHECKS * shift), rng, REPLICATES))
            history.append(
                checked_run(curve, ("low", "middle", "high"), CHECKS, found, np.full(3, REPLICATES))
            )
        curve = curves[trial * runs + past]
        mean = noisy(response(np.array([x * np.exp(s_b * rng.standard_normal())])), rng, REPLICATES)
        for i, components in enumerate(([between_runs(history)], [])):
            q = curve.invert(mean, replicates=REPLICATES, components=components)
            hit[i] += q.lower[0] <= x <= q.upper[0]
    return tuple(hit / trials)


def coverage_of_another_day(*, past, trials, seed, x=50.0, scatter=(0.05, 0.05, 0.10, 0.03)):
    """The same for samples of one run read on the curve of another; parameters scatter in their logarithm."""
    rng = np.random.default_rng(seed)
    runs = past + 1
    hit = np.zeros(2)
    truth = TRUTH * np.exp(np.array(scatter) * rng.standard_normal((trials * (runs + 1), 4)))
    means = np.array([response(LEVELS, p) for p in truth])
    curves = fit_stack(LEVELS, noisy(means, rng), model="4PL", noise=noise())
    for trial in range(trials):
        first = trial * (runs + 1)
        history = [curves[first + k] for k in range(past)]
        curve = curves[first + past]
        mean = noisy(response(np.array([x]), truth[first + runs]), rng, REPLICATES)
        for i, components in enumerate(([curve_scatter(history)], [])):
            q = curve.invert(mean, replicates=REPLICATES, components=components)
            hit[i] += q.lower[0] <= x <= q.upper[0]
    return tuple(hit / trials)
