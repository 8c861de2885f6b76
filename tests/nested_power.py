"""Simulated histories of a curve of given asymmetry, and how often pooled tests call for the larger model."""

from dataclasses import dataclass

import numpy as np

import calib
from calib.curves.nested_models import ALPHA, Nesting, compare_nested, nestings_of
from calib.curves.noise import assumed_noise
from calib.models import response_model

LEVELS = 3.0 ** np.arange(-6, 2) * 1000 / 3.0
CV = 0.04
(FOUR_FIVE,) = (n for n in nestings_of("4PL") if n.smaller == "4PL")


@dataclass(frozen=True)
class Power:
    """Shares of histories in which the test rejects at 5 %, at 1 %, and in which the larger model is called for."""

    at_5: float
    at_1: float
    significant: float
    worst_bias: float


def power(
    asymmetry: float,
    histories: int,
    runs: int = 10,
    wells: int = 2,
    seed: int = 1,
    nesting: Nesting = FOUR_FIVE,
) -> Power:
    """Power of the pooled nested test of a 4PL against a 5PL; asymmetry 1 gives its size."""
    rng = np.random.default_rng(seed)
    x = np.repeat(LEVELS, wells)
    truth = (0.05, 2.5, 100.0, 1.2, asymmetry)
    mean = response_model("5PL").response(x, truth)
    noise = assumed_noise("response", 2.0)
    found = []
    for _ in range(histories):
        y = mean * (1 + CV * rng.standard_normal((runs, x.size)))
        found.append(compare_nested(calib.fit_stack(x, y, "4PL", noise=noise), nesting, noise))
    p = np.array([f.nested.p for f in found])
    return Power(
        float(np.mean(p < 0.05)),
        float(np.mean(p < ALPHA)),
        float(np.mean([f.significant for f in found])),
        float(np.median([f.worst_bias(4.0, 333.0) for f in found])),
    )
