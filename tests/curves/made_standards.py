"""Made-up standards with known truth."""

from __future__ import annotations

import numpy as np

from calib.models import response_model

LEVELS = np.array([0.457, 1.37, 4.12, 12.3, 37.0, 111.0, 333.0, 1000.0])
RISING = (0.05, 2.5, 100.0, 1.2)
FALLING = (2.5, 0.05, 100.0, 1.2)


def assay_standards(
    truth: tuple[float, ...] = RISING, replicates: int = 2, sd: float = 0.02, seed: int = 7
) -> tuple[np.ndarray, np.ndarray]:
    """Readings of a four-parameter logistic with constant noise: x (n,), y (n,)."""
    x = np.repeat(LEVELS, replicates)
    noise = np.random.default_rng(seed).normal(0.0, sd, x.size)
    return x, response_model("4PL").response(x, truth) + noise


def codes(curve: object) -> set[str]:
    return {finding.code for finding in curve.findings}  # type: ignore[attr-defined]
