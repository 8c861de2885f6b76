"""What each standard reading does to the concentrations that are read from the curve."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from calib.curves.curve import Curve
from calib.curves.refit import own_start, refit, refuse_unfitted
from calib.curves.stack import CurveStack
from calib.curves.standards import frozen
from calib.errors import InputError
from calib.models import CustomModel
from calib.quantification.inverse import concentration_of
from calib.quantification.range import working_range

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Influence:
    """Result of `influence`, for n standard readings and c concentrations.

    Attributes
    ----------
    concentrations : (c,) array
    relative_change : (n, c) array
        Concentration read without that reading over the one read with it, minus 1; nan where the
        curve without it never reaches the response, or cannot be fitted.
    cook_distance : (n,) array
        Squared shift of the fitted responses over the free parameters and scale² (Cook,
        Technometrics 19 (1977) 15; from memory). nan without residual degrees of freedom.
    """

    concentrations: Array
    relative_change: Array
    cook_distance: Array

    @property
    def largest(self) -> Array:
        """Largest size of the relative change by each reading (n,); inf where nothing is read without it."""
        size = np.abs(self.relative_change)
        return np.asarray(np.where(np.isnan(size), np.inf, size).max(axis=1))


def influence(curve: Curve, concentrations: ArrayLike | None = None) -> Influence:
    """Leave each standard reading out in turn and read the same responses again.

    The n curves are one stack, with the noise model, fixed values and bounds of the curve.

    Parameters
    ----------
    curve : Curve
    concentrations : (c,) array, optional
        Where to look; otherwise the levels inside the working range (CV of at most 20 %).

    Raises
    ------
    InputError
        For concentrations that cannot be used, or when there is no working range.
    ModelError
        For a curve that was not fitted.

    Examples
    --------
    >>> import calib
    >>> curve = calib.fit([1, 2, 3, 4, 5], [2.0, 4.1, 5.9, 8.0, 13.0], model="line")
    >>> int(calib.influence(curve, [2.0, 3.0]).largest.argmax())
    4
    """
    refuse_unfitted(curve)
    x = _levels_in_use(curve) if concentrations is None else _checked(curve, concentrations)
    without = _leave_one_out(curve)
    response = curve.predict(x)
    read = np.array([_read(each, response) for each in without])
    return Influence(frozen(x), frozen(read / x - 1.0), frozen(_cook_distance(curve, without)))


def _levels_in_use(curve: Curve) -> Array:
    held = working_range(curve)
    levels = np.unique(curve.standards.concentration)
    inside = levels[(levels >= held.lowest) & (levels <= held.highest)]
    if inside.size == 0:
        raise InputError(
            "no standard lies where the curve reads with a CV of at most 20 %; say at which concentrations to look"
        )
    return inside


def _checked(curve: Curve, concentrations: ArrayLike) -> Array:
    x = np.atleast_1d(np.asarray(concentrations, dtype=np.float64))
    if x.ndim != 1 or x.size == 0:
        raise InputError(f"concentrations must be one-dimensional and not empty, got shape {x.shape}")
    unusable = ~np.isfinite(x) | (x <= 0 if curve.response_model.logarithmic else x == 0)
    if unusable.any():
        i = int(np.argmax(unusable))
        raise InputError(f"concentrations[{i}] = {x[i]:g} has no relative change; give values above 0")
    return x


def _leave_one_out(curve: Curve) -> CurveStack:
    """Curve i lacks reading i."""
    y = curve.standards.response
    response = np.where(np.eye(y.size, dtype=bool), np.nan, y)
    own = isinstance(curve.response_model, CustomModel)
    return refit(curve, response, own_start(curve) if own else None)


def _read(curve: Curve, response: Array) -> Array:
    """Concentrations; nan everywhere on a curve that could not be fitted."""
    if not np.all(np.isfinite(curve.values)):
        return np.full(response.shape, np.nan)
    return concentration_of(curve, response)


def _cook_distance(curve: Curve, without: CurveStack) -> Array:
    x = curve.standards.concentration
    mean = curve.predict(x)
    shifted = np.array([curve.response_model.response(x, p) for p in without.parameters])
    with np.errstate(invalid="ignore", divide="ignore"):
        squares = ((shifted - mean) ** 2 / curve.noise.at_standards(mean, x)).sum(axis=1)
        return np.asarray(squares / (int(curve.free.sum()) * curve.scale**2))
