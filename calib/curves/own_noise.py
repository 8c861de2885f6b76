"""A run that has no history yet: the variance function its own residuals prefer."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from numpy.typing import ArrayLike, NDArray

from calib.curves.curve import Curve
from calib.curves.fit import fit
from calib.curves.requests import Bounds
from calib.curves.variance_function import ESTIMATED, pseudo_likelihood
from calib.models import ResponseModel

Array = NDArray[np.float64]


def fit_with_own_noise(
    concentration: ArrayLike,
    response: ArrayLike,
    model: str | ResponseModel,
    *,
    fixed: Mapping[str, float] | None = None,
    bounds: Bounds | None = None,
) -> Curve:
    """Fit with the variance function of either family, whichever has the smaller pseudo-likelihood.

    Both are estimated from this run alone; the curve carries the finding 'variance-from-one-run'.

    Raises
    ------
    InputError, ModelError
        As `calib.fit` does.
    """
    curves = [
        fit(concentration, response, model, noise=family, fixed=fixed, bounds=bounds) for family in ESTIMATED
    ]
    return min(curves, key=lambda curve: (not curve.converged, _pseudo_likelihood(curve)))


def leverage(curve: Curve) -> Array:
    """Diagonal of the hat matrix at the standards (n,); nan without residual degrees of freedom."""
    x = curve.standards.concentration
    return np.asarray(curve.fit_variance(x) / curve.reading_variance(x))


def _pseudo_likelihood(curve: Curve) -> float:
    if not curve.degrees_of_freedom > 0:
        return np.inf
    mean = curve.predict(curve.standards.concentration)
    return pseudo_likelihood(curve.noise, curve.standards.response - mean, mean, leverage(curve))
