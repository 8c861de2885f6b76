"""Curves with known truth to be read back."""

from __future__ import annotations

import numpy as np

import calib
from calib import Curve
from calib.models import response_model

LEVELS = np.repeat([0.457, 1.37, 4.12, 12.3, 37.0, 111.0, 333.0, 1000.0], 2)
RISING = (0.05, 2.5, 100.0, 1.2)
FALLING = (2.5, 0.05, 100.0, 1.2)


def assay_curve(truth: tuple[float, ...] = RISING, sd: float = 0.03, seed: int = 1) -> Curve:
    """A full four-parameter logistic; the falling curve is the rising one mirrored."""
    noise = np.random.default_rng(seed).normal(0.0, sd, LEVELS.size)
    sign = 1.0 if truth[1] > truth[0] else -1.0
    return calib.fit(LEVELS, response_model("4PL").response(LEVELS, truth) + sign * noise)


def line_curve(slope: float = 2.0, sd: float = 0.4, seed: int = 3) -> Curve:
    x = np.linspace(1.0, 10.0, 10)
    return calib.fit(x, 5.0 + slope * x + np.random.default_rng(seed).normal(0.0, sd, 10), model="line")
