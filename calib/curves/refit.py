"""Other readings of the same standards under the settings of a curve that exists."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from numpy.typing import ArrayLike, NDArray

from calib.curves.curve import Curve
from calib.curves.stack import CurveStack, fit_stack
from calib.errors import ModelError

Array = NDArray[np.float64]


def refit(curve: Curve, response: Array, start: Mapping[str, ArrayLike] | None = None) -> CurveStack:
    """Fit runs (runs, n) at the standards of a curve: its model, fixed values, bounds and noise model.

    The noise model is the curve's own: nothing about it is estimated again.

    Raises
    ------
    ModelError
        For a curve that was not fitted, or of several columns.
    """
    refuse_unfitted(curve)
    return fit_stack(
        curve.standards.concentration,
        response,
        curve.response_model,
        noise=curve.noise,
        fixed=curve.fixed,
        bounds=requested_bounds(curve),
        start=start,
    )


def refuse_unfitted(curve: Curve) -> None:
    """Refuse what has no curve on one concentration axis."""
    if not np.all(np.isfinite(curve.values)):
        raise ModelError(f"the curve was not fitted ({curve.findings[0].message}); correct that first")
    if curve.standards.concentration.ndim > 1:
        raise ModelError(f"model '{curve.model}' has several columns and cannot be fitted in a stack")


def own_start(curve: Curve) -> dict[str, float]:
    """The parameters of a curve as start values."""
    return {n: v for n, v in curve.parameters.items() if n not in curve.fixed}


def requested_bounds(curve: Curve) -> dict[str, tuple[float, float]]:
    """Bounds that somebody asked for: those that are not the model's own.

    A parameter the model holds by default is free only because somebody asked.
    """
    model = curve.response_model
    lower, upper = model.bounds(curve.standards.concentration)
    asked = (curve.lower != lower) | (curve.upper != upper)
    return {
        name: (float(curve.lower[i]), float(curve.upper[i]))
        for i, name in enumerate(model.names)
        if curve.free[i] and (asked[i] or name in model.fixed_by_default)
    }
