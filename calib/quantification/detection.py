"""Detection and quantification limits by the stated procedures; each names which one it is."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from calib.curves.quantiles import student_quantile
from calib.errors import InputError

NORMAL_95 = 1.645
"""One-sided 95 % quantile of the normal distribution, as CLSI EP17 rounds it."""

FEWEST = 7
"""Fewest spiked samples, and blanks, of the method detection limit (40 CFR 136, Appendix B)."""


@dataclass(frozen=True, slots=True)
class MethodDetectionLimit:
    """Method detection limit, in the unit of the results it comes from.

    Attributes
    ----------
    value : float
        The larger of the two below.
    of_spikes : float
        t(0.99, n - 1) times the standard deviation of the spiked samples.
    of_blanks : float or None
        From the method blanks; None where no blank gave a number.
    """

    value: float
    of_spikes: float
    of_blanks: float | None


def method_detection_limit(
    spikes: Sequence[float], blanks: Sequence[float | None] = ()
) -> MethodDetectionLimit:
    """Compute the method detection limit from spiked samples and method blanks.

    Source: 40 CFR Part 136, Appendix B, revision 2 (definition and the greater of the two: verified; the
    branches of the blanks: from memory).

    Parameters
    ----------
    spikes : sequence of float
        Results of at least 7 samples spiked at 2 to 10 times the expected limit.
    blanks : sequence of float or None
        Results of the method blanks; None where a blank gave no number.

    Raises
    ------
    InputError
        With fewer than 7 spiked samples, or when a result is not finite.

    Examples
    --------
    >>> round(method_detection_limit([1.9, 2.2, 2.05, 1.8, 2.3, 2.1, 1.95]).value, 5)
    0.54756
    """
    found = _finite(spikes, "spiked samples")
    if found.size < FEWEST:
        raise InputError(
            f"{found.size} spiked samples: the procedure asks for at least {FEWEST}; measure more"
        )
    of_spikes = _t99(found.size) * float(found.std(ddof=1))
    of_blanks = _of_blanks(blanks)
    return MethodDetectionLimit(max(of_spikes, of_blanks or 0.0), of_spikes, of_blanks)


def _of_blanks(blanks: Sequence[float | None]) -> float | None:
    numbers = _finite([b for b in blanks if b is not None], "blanks")
    if not numbers.size:
        return None
    if numbers.size < len(blanks) or numbers.size < 2:
        return float(numbers.max())
    return max(0.0, float(numbers.mean())) + _t99(numbers.size) * float(numbers.std(ddof=1))


@dataclass(frozen=True, slots=True)
class BlankLimits:
    """Limit of blank and limit of detection, in the unit of the results they come from."""

    of_blank: float
    of_detection: float


def blank_limits(blanks: ArrayLike, low_samples: ArrayLike) -> BlankLimits:
    """Compute limit of blank and limit of detection from blanks and samples of low concentration.

    LoB = mean of the blanks + 1.645 s; LoD = LoB + 1.645 times the standard deviation of low samples.

    Source: CLSI EP17, edition not recorded (second-hand).

    Raises
    ------
    InputError
        With fewer than two results of either, or when one is not finite.
    """
    blank, low = _finite(blanks, "blanks"), _finite(low_samples, "low samples")
    for what, values in (("blanks", blank), ("low samples", low)):
        if values.size < 2:
            raise InputError(f"{values.size} {what}: a standard deviation needs at least two; measure more")
    limit = float(blank.mean()) + NORMAL_95 * float(blank.std(ddof=1))
    return BlankLimits(limit, limit + NORMAL_95 * float(low.std(ddof=1)))


@dataclass(frozen=True, slots=True)
class LineLimits:
    """Critical value and minimum detectable value of the concentration, from a straight calibration line."""

    critical: float
    detectable: float


def line_limits(
    concentration: ArrayLike, response: ArrayLike, replicates: int = 1, alpha: float = 0.05
) -> LineLimits:
    """Compute decision and detection limit of a straight line of constant scatter.

    x_C = t(1 - alpha, N - 2) (s/b) sqrt(1/K + 1/N + mean²/Sxx), and x_D taken as 2 x_C.

    Source: ISO 11843-2:2000, 5.3 (from memory). For curved or weighted calibrations use `precision_profile`
    and the limits of the curve (ISO 11843-5).

    Parameters
    ----------
    concentration, response : (N,) arrays
        Of the standards.
    replicates : int
        K, readings of the sample.
    alpha : float
        Probability of either wrong decision.

    Raises
    ------
    InputError
        With fewer than three readings, one level, no slope, or values that are not finite.
    """
    x, y = _finite(concentration, "concentrations"), _finite(response, "responses")
    if x.size != y.size or x.size < 3 or np.unique(x).size < 2:
        raise InputError(
            f"{x.size} concentrations and {y.size} responses: give as many, at least 3, at two levels or more"
        )
    if replicates < 1 or not 0 < alpha < 0.5:
        raise InputError(f"{replicates} replicates at alpha {alpha:g}: give 1 or more, and 0 < alpha < 0.5")
    centre = float(x.mean())
    spread = float(np.sum((x - centre) ** 2))
    slope = float(np.sum((x - centre) * (y - y.mean()))) / spread
    if slope == 0:
        raise InputError("the line has no slope, so it detects nothing; look at the responses")
    residual = y - y.mean() - slope * (x - centre)
    s = math.sqrt(float(np.sum(residual**2)) / (x.size - 2))
    t = float(student_quantile(x.size - 2, 1 - alpha))
    critical = t * s / abs(slope) * math.sqrt(1 / replicates + 1 / x.size + centre**2 / spread)
    return LineLimits(critical, 2 * critical)


def _t99(count: int) -> float:
    return float(student_quantile(count - 1, 0.99))


def _finite(values: ArrayLike, what: str) -> NDArray[np.float64]:
    found = np.asarray(values, dtype=np.float64).ravel()
    if not np.all(np.isfinite(found)):
        raise InputError(
            f"{what}: {found[~np.isfinite(found)][0]:g} is no result; leave it out, with its cause"
        )
    return found
