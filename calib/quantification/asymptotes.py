"""How near a response is to the ends of what its curve can reach."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from calib.curves.curve import Curve
from calib.curves.quantiles import two_sided
from calib.quantification.axis import End, axis_of

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class AsymptoteIndex:
    """Fieller-type index of each end of a curve for m responses.

    The half width of the prediction band at the end over the distance of the response from it:
    near 0 the end is far, at 1 and above the response may belong to the end itself. It is shown
    beside a result; its state follows the limits that are found, never the index.

    Attributes
    ----------
    zero, infinite : (m,) arrays
        At concentration 0 and for large concentrations; nan where the model has no finite end.
    """

    zero: Array
    infinite: Array


def asymptote_index(
    curve: Curve, responses: ArrayLike, replicates: ArrayLike = 1, confidence: float = 0.95
) -> AsymptoteIndex:
    """Index h = q·sqrt(scale²·G(P)/m + J(P) cov J(P)')/|P − y| of each end P of the curve.

    Source: E. C. Fieller, J. R. Stat. Soc. B 16 (1954) 175, for a ratio (from memory); here for the
    distance to an end, with the gradient of the end in the parameters.

    Parameters
    ----------
    curve : Curve
    responses : (m,) array
        Mean responses.
    replicates : int or (m,) array
    confidence : float
        Two-sided.
    """
    y = np.atleast_1d(np.asarray(responses, dtype=np.float64))
    axis = axis_of(curve)
    m = np.broadcast_to(np.asarray(replicates, dtype=np.float64), y.shape)
    q = float(two_sided(curve.coverage_freedom, confidence))
    ends = (axis.low_limit, axis.high_limit) if axis.logarithmic else (None, None)
    zero, infinite = (_index(curve, end, y, m, q) for end in ends)
    return AsymptoteIndex(zero, infinite)


def _index(curve: Curve, end: End | None, y: Array, m: Array, q: float) -> Array:
    if end is None:
        return np.full(y.shape, np.nan)
    g = curve.noise.variance(np.array([end.response]), np.array([end.concentration]))[0]
    own = end.gradient @ curve.covariance @ end.gradient
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.asarray(q * np.sqrt(curve.scale**2 * g / m + own) / np.abs(end.response - y))
