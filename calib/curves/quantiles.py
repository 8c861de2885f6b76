"""Quantiles of Student's t, from scipy.special (scipy.stats would double the start-up time)."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import ndtri, stdtrit


def student_quantile(degrees_of_freedom: ArrayLike, probability: float) -> NDArray[np.float64]:
    """Quantile of t; normal for infinite degrees of freedom, infinite for none.

    Parameters
    ----------
    degrees_of_freedom : array-like
        May be fractional (Welch–Satterthwaite) or infinite.
    probability : float
        Cumulative probability, e.g. 0.975.
    """
    nu = np.asarray(degrees_of_freedom, dtype=np.float64)
    finite = np.where(np.isfinite(nu) & (nu > 0), nu, 1.0)
    values = np.where(np.isinf(nu), ndtri(probability), stdtrit(finite, probability))
    return np.where(nu > 0, values, np.inf)


def two_sided(degrees_of_freedom: ArrayLike, confidence: float) -> NDArray[np.float64]:
    """Quantile that leaves (1 − confidence)/2 in either tail."""
    return student_quantile(degrees_of_freedom, 0.5 + 0.5 * confidence)
