"""Line through the origin."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from calib.models.response_model import Array, Parameter, Parameters, ResponseModel, as_array


class Proportional(ResponseModel):
    """y = slope·x."""

    name = "proportional"
    formula = "slope·x"
    logarithmic = False
    parameters = (Parameter("slope", "sensitivity", "response/concentration", linear=True),)

    def response(self, x: ArrayLike, p: Parameters) -> Array:
        """Response at concentrations ``x``."""
        return as_array(p[0] * as_array(x))

    def derivatives(self, x: ArrayLike, p: Parameters) -> tuple[Array, ...]:
        """Derivative in the slope."""
        return (as_array(x),)

    def slope(self, x: ArrayLike, p: Parameters) -> Array:
        """Sensitivity, the same everywhere."""
        return as_array(p[0] + 0.0 * as_array(x))

    def inverse(self, y: ArrayLike, p: Parameters) -> Array:
        """Exact inverse; nan for a line without slope."""
        with np.errstate(divide="ignore", invalid="ignore"):
            return as_array(np.where(p[0] != 0, as_array(y) / p[0], np.nan))

    def start(self, x: Array, y: Array) -> Array:
        """Any start will do: the slope is solved in closed form."""
        return np.zeros((1, y.shape[1]))

    def grid(self, x: Array) -> Array:
        """Nothing to search."""
        return np.empty((1, 0))
