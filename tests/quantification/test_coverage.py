"""Nominal 95 % intervals of simulated unknowns contain the truth in about 95 % of cases.

Seeded runs, 8 levels × 2, noise sd = 0.04·mean^0.8 with its true variance function
assumed. The standard error of a coverage is sqrt(0.95·0.05/runs), 1.3 points for 300 runs
and 1.5 for 200; 3.2 standard errors are allowed at each concentration and 2 for the mean
over the concentrations. Larger simulations belong to tests/benchmarks.
"""

from __future__ import annotations

import numpy as np
import pytest
from made_curves import FALLING, LEVELS, RISING

import calib
from calib.models import response_model

NOISE = calib.assumed_noise("response", exponent=1.6)
TRUTHS = {
    "rising 4PL": ("4PL", RISING, (1.0, 3.0, 30.0, 300.0, 1000.0), 300),
    "falling 4PL": ("4PL", FALLING, (3.0, 30.0, 300.0), 200),
    "saturation": ("saturation", (0.05, 2.5, 100.0), (1.0, 10.0, 100.0, 600.0), 200),
}


@pytest.mark.parametrize("name", TRUTHS)
def test_coverage(name: str) -> None:
    key, truth, positions, runs = TRUTHS[name]
    model, x = response_model(key), np.array(positions)
    rng = np.random.default_rng(20260302)

    def readings(at: np.ndarray) -> np.ndarray:
        mean = model.response(at, truth)
        return mean + rng.normal(size=at.size) * 0.04 * mean**0.8

    covered = np.zeros((runs, x.size), dtype=bool)
    for run in range(runs):
        curve = calib.fit(LEVELS, readings(LEVELS), model=key, noise=NOISE)
        quantity = curve.invert(readings(x))
        covered[run] = (quantity.lower <= x) & (x <= quantity.upper)
    share = covered.mean(axis=0)
    standard_error = np.sqrt(0.95 * 0.05 / runs)
    assert (np.abs(share - 0.95) <= 3.2 * standard_error).all(), dict(zip(positions, share, strict=True))
    assert abs(share.mean() - 0.95) <= 2.0 * standard_error, share
