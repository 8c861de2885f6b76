"""Decision, detection and quantification limit of a fitted curve of any form."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calib.curves.curve import Curve
from calib.curves.quantiles import student_quantile
from calib.errors import InputError
from calib.quantification.inverse import concentration_of
from calib.quantification.range import working_range

GRID = 1001
HALVINGS = 30
FAR_BELOW = 1e-4
"""The search for the detection limit begins at this share of the lowest standard."""


@dataclass(frozen=True, slots=True)
class CurveLimits:
    """Limits of one day's curve, in its concentration unit; nan where it has none.

    They are estimates from one curve, and no method detection limit.

    Attributes
    ----------
    critical : float
        Concentration read from the response above which a blank lies with probability alpha.
    detectable : float
        Smallest concentration whose response lies beyond that with probability 1 - alpha.
    quantifiable : float
        Largest of the detectable concentration, the lowest standard, and the lower end of the working range.
    """

    critical: float
    detectable: float
    quantifiable: float


def curve_limits(
    curve: Curve, replicates: int = 1, alpha: float = 0.05, coefficient_of_variation: float = 0.2
) -> CurveLimits:
    """Compute the limits of a curve from its own scatter and uncertainty.

    y_C = f(0) ± t(1 - alpha, nu) sqrt(G(f(0)) s²/m + J(0) cov J(0)'), on the side of the standards; the
    detection limit is the smallest x with |f(x) - y_C| = t sqrt(G(f(x)) s²/m + J(x) cov J(x)').

    Source: ISO 11843-5:2008, non-linear calibration, in the form of Currie (both from memory).

    Parameters
    ----------
    curve : Curve
    replicates : int
        Readings of the sample.
    alpha : float
        Probability of either wrong decision.
    coefficient_of_variation : float
        Required at the quantification limit.

    Raises
    ------
    InputError
        For no replicates or an impossible alpha.
    """
    if replicates < 1 or not 0 < alpha < 0.5:
        raise InputError(f"{replicates} replicates at alpha {alpha:g}: give 1 or more, and 0 < alpha < 0.5")
    if not (curve.converged and np.all(np.isfinite(curve.values))):
        return CurveLimits(math.nan, math.nan, math.nan)
    t = float(student_quantile(curve.coverage_freedom, 1 - alpha))
    zero, top = (float(curve.predict(x)) for x in (0.0, curve.standards.highest))
    side = math.copysign(1.0, top - zero)
    decision = zero + side * t * float(_sd(curve, np.array([0.0]), replicates)[0])
    critical = float(concentration_of(curve, [decision])[0])
    detectable = _detectable(curve, decision, side, t, replicates)
    working = working_range(curve, coefficient_of_variation, replicates)
    ends = (detectable, working.lowest, curve.standards.lowest)
    return CurveLimits(critical, detectable, max(ends) if all(map(math.isfinite, ends)) else math.nan)


def _sd(curve: Curve, x: NDArray[np.float64], replicates: int) -> NDArray[np.float64]:
    return np.asarray(np.sqrt(curve.reading_variance(x) / replicates + curve.fit_variance(x)))


def _detectable(curve: Curve, decision: float, side: float, t: float, replicates: int) -> float:
    """Smallest concentration told from a blank; nan where none up to the highest standard is."""
    start = curve.standards.lowest * FAR_BELOW
    if not (math.isfinite(start) and start > 0):
        return math.nan
    x = np.geomspace(start, curve.standards.highest, GRID)

    def told(at: NDArray[np.float64]) -> NDArray[np.bool_]:
        return np.asarray(side * (curve.predict(at) - decision) >= t * _sd(curve, at, replicates))

    found = np.flatnonzero(told(x))
    if not found.size:
        return math.nan
    first = int(found[0])
    if first == 0:
        return float(x[0])
    low, high = float(x[first - 1]), float(x[first])
    for _ in range(HALVINGS):
        middle = math.sqrt(low * high)
        low, high = (low, middle) if told(np.array([middle]))[0] else (middle, high)
    return high
