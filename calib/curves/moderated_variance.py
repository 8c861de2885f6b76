"""Residual variance of a run, moderated by those of past runs.

Empirical Bayes: s̃² = (d₀·s₀² + d·s²)/(d₀ + d) with d₀ + d degrees of freedom, where the
history tells s₀² and how much weight d₀ it deserves. Moments of ln s² by the method of
G. K. Smyth, Linear models and empirical Bayes methods, Stat. Appl. Genet. Mol. Biol. 3 (2004),
section 6 (from memory).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import digamma, fdtrc, fdtri, polygamma

Array = NDArray[np.float64]

# One clean run in a hundred is called noisy where all runs have the same variance.
NOISY = 0.99


@dataclass(frozen=True, slots=True)
class ModeratedVariance:
    """What past runs say about the residual variance of the next one.

    Attributes
    ----------
    sd : float
        s₀, typical residual standard deviation of the history.
    weight : float
        d₀, degrees of freedom the history adds: few where the runs differ among themselves.
    degrees_of_freedom : float
        Of all past runs together.
    """

    sd: float
    weight: float
    degrees_of_freedom: float

    def is_noisy(self, variance: ArrayLike, degrees_of_freedom: ArrayLike) -> NDArray[np.bool_]:
        """Whether the variance of a run exceeds s₀² by an F test at 99 %."""
        d = np.asarray(degrees_of_freedom, dtype=np.float64)
        ratio = np.where(d > 0, np.asarray(variance) / self.sd**2, 0.0)
        return np.asarray(ratio > self.limit(d))

    def limit(self, degrees_of_freedom: ArrayLike) -> Array:
        """Largest ratio s²/s₀² of a run that is not noisy."""
        d = np.maximum(np.asarray(degrees_of_freedom, dtype=np.float64), 1.0)
        return np.asarray(fdtri(d, self.degrees_of_freedom, NOISY))

    def flagged_when_clean(self, degrees_of_freedom: float) -> float:
        """Share of clean runs above the limit: more than 1 % where the runs themselves differ."""
        limit = float(self.limit(degrees_of_freedom))
        return float(fdtrc(max(degrees_of_freedom, 1.0), self.weight, limit))

    def moderated(self, variance: ArrayLike, degrees_of_freedom: ArrayLike) -> tuple[Array, Array]:
        """Variance to use for a run, and its degrees of freedom; a noisy run keeps its own.

        Parameters
        ----------
        variance, degrees_of_freedom : (R,) arrays or numbers
            Of the runs themselves; without degrees of freedom the history alone speaks.
        """
        d = np.asarray(degrees_of_freedom, dtype=np.float64)
        own = np.where(d > 0, np.asarray(variance, dtype=np.float64), 0.0)
        nu = self.weight + d
        together = (self.weight * self.sd**2 + d * own) / nu
        noisy = self.is_noisy(own, d)
        return np.where(noisy, own, together), np.where(noisy, d, nu)


def moderated_variance(variance: ArrayLike, degrees_of_freedom: ArrayLike) -> ModeratedVariance:
    """Typical variance of past runs, and how many degrees of freedom it is worth.

    Parameters
    ----------
    variance, degrees_of_freedom : (K,) arrays
        Of each past run, both above 0.
    """
    s2, d = np.asarray(variance, dtype=np.float64), np.asarray(degrees_of_freedom, dtype=np.float64)
    total = float(d.sum())
    e = np.log(s2) - digamma(d / 2.0) + np.log(d / 2.0)
    excess = float(np.var(e, ddof=1) - np.mean(polygamma(1, d / 2.0))) if s2.size > 1 else 0.0
    if excess <= 0.0:
        return ModeratedVariance(float(np.sqrt(np.sum(d * s2) / total)), total, total)
    weight = 2.0 * _inverse_trigamma(excess)
    typical = np.exp(e.mean() + digamma(weight / 2.0) - np.log(weight / 2.0))
    return ModeratedVariance(float(np.sqrt(typical)), min(weight, total), total)


def _inverse_trigamma(y: float) -> float:
    """Newton on 1/trigamma, which is nearly a straight line (Smyth 2004, appendix)."""
    x = 0.5 + 1.0 / y
    for _ in range(50):
        slope = float(polygamma(2, x))
        step = float(polygamma(1, x)) * (1.0 - float(polygamma(1, x)) / y) / slope
        x += step
        if abs(step) < 1e-12 * x:
            break
    return x
