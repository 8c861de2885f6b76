"""Whether replicates of one unknown agree with the noise of the curve."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from scipy.special import chdtri, fdtri

from calib.curves.curve import Curve
from calib.quantification.inverse import concentration_of

# One sample in a hundred is flagged by chance.
CONFIDENCE = 0.99


def replicates_disagree(curve: Curve, responses: Sequence[float]) -> bool:
    """Whether the variance of replicate responses exceeds scale²·G by an F test at 99 %.

    Parameters
    ----------
    curve : Curve
    responses : sequence of float
        At least two replicate responses of one unknown.
    """
    values = np.asarray(responses, dtype=np.float64)
    mean = np.array([values.mean()])
    # The variance function takes the mean response, or the concentration it reads.
    x = concentration_of(curve, mean)
    expected = curve.scale**2 * float(curve.noise.variance(mean, np.where(np.isfinite(x), x, 0.0))[0])
    if not (np.isfinite(expected) and expected > 0):
        return False
    return bool(values.var(ddof=1) / expected > _limit(values.size - 1, curve.coverage_freedom))


def _limit(numerator: int, denominator: float) -> float:
    """F quantile; chi-square over its degrees of freedom when the noise is known."""
    if np.isinf(denominator):
        return float(chdtri(numerator, 1.0 - CONFIDENCE)) / numerator
    return float(fdtri(numerator, denominator, CONFIDENCE))
