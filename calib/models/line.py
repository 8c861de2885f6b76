"""Straight line."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from calib.models.response_model import (
    Array,
    Parameter,
    Parameters,
    ResponseModel,
    as_array,
)


class Line(ResponseModel):
    """y = intercept + slope·x (ordinary textbook form)."""

    name = "line"
    formula = "intercept + slope·x"
    logarithmic = False
    parameters = (
        Parameter("intercept", "response at concentration 0", "response", linear=True),
        Parameter("slope", "sensitivity", "response/concentration", linear=True),
    )

    def response(self, x: ArrayLike, p: Parameters) -> Array:
        """Response at concentrations ``x``."""
        intercept, slope = p
        return as_array(intercept + slope * as_array(x))

    def derivatives(self, x: ArrayLike, p: Parameters) -> tuple[Array, ...]:
        """Derivatives in intercept and slope."""
        x = as_array(x)
        return np.ones_like(x), x

    def slope(self, x: ArrayLike, p: Parameters) -> Array:
        """Sensitivity, the same everywhere."""
        return as_array(p[1] + 0.0 * as_array(x))

    def inverse(self, y: ArrayLike, p: Parameters) -> Array:
        """Exact inverse; nan for a line without slope."""
        intercept, slope = p
        with np.errstate(divide="ignore", invalid="ignore"):
            return as_array(np.where(slope != 0, (as_array(y) - intercept) / slope, np.nan))

    def start(self, x: Array, y: Array) -> Array:
        """Any start will do: both parameters are solved in closed form."""
        return np.zeros((2, y.shape[1]))

    def grid(self, x: Array) -> Array:
        """Nothing to search."""
        return np.empty((1, 0))
