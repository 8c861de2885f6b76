"""Where a curve may be used: precision profile and working range."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from calib.curves.curve import Curve
from calib.errors import InputError

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class WorkingRange:
    """Connected range around the best-determined concentration, within the standards.

    Both ends are nan when no concentration meets the required coefficient of variation.
    """

    lowest: float
    highest: float
    coefficient_of_variation: float


def precision_profile(curve: Curve, concentration: ArrayLike, replicates: int = 1) -> Array:
    """Relative standard uncertainty of an unknown at each concentration.

    CV(x) = sqrt(scale²·G/m + J cov J') / |x·f'(x)|: the delta form, which is what a
    precision profile plots (ISO 11843-5, from memory).
    """
    x = np.asarray(concentration, dtype=np.float64)
    variance = curve.reading_variance(x) / replicates + curve.fit_variance(x)
    with np.errstate(divide="ignore", invalid="ignore"):
        sensitivity = np.abs(x * curve.response_model.slope(x, curve.values))
        return np.asarray(np.sqrt(variance) / sensitivity)


def working_range(curve: Curve, coefficient_of_variation: float = 0.2, replicates: int = 1) -> WorkingRange:
    """Range in which an unknown of ``replicates`` readings meets the required CV.

    Raises
    ------
    InputError
        When the required coefficient of variation is not above 0.
    """
    if not coefficient_of_variation > 0:
        raise InputError(f"coefficient of variation {coefficient_of_variation} must be above 0")
    low, high = curve.standards.lowest, curve.standards.highest
    if not (np.isfinite(low) and low > 0 and high > low and np.all(np.isfinite(curve.values))):
        return WorkingRange(np.nan, np.nan, coefficient_of_variation)
    x = np.geomspace(low, high, 801)
    profile = precision_profile(curve, x, replicates)
    good = profile <= coefficient_of_variation
    best = int(np.argmin(np.where(good, profile, np.inf)))
    if not good[best]:
        return WorkingRange(np.nan, np.nan, coefficient_of_variation)
    bad = np.flatnonzero(~good)
    left, right = bad[bad < best], bad[bad > best]
    first = int(left[-1]) + 1 if left.size else 0
    last = int(right[0]) - 1 if right.size else x.size - 1
    return WorkingRange(float(x[first]), float(x[last]), coefficient_of_variation)
