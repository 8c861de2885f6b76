"""Second-degree polynomial."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from calib.models.response_model import Array, Parameter, Parameters, ResponseModel, as_array


class Quadratic(ResponseModel):
    """y = intercept + slope·x + curvature·x².

    It is inverted on the arm that carries most of the standards; the other arm gives
    the same responses at other concentrations.
    """

    name = "quadratic"
    formula = "intercept + slope·x + curvature·x²"
    logarithmic = False
    parameters = (
        Parameter("intercept", "response at concentration 0", "response", linear=True),
        Parameter("slope", "sensitivity at concentration 0", "response/concentration", linear=True),
        Parameter("curvature", "quadratic coefficient", "response/concentration²", linear=True),
    )

    def response(self, x: ArrayLike, p: Parameters) -> Array:
        """Response at concentrations ``x``."""
        intercept, slope, curvature = p
        x = as_array(x)
        return as_array(intercept + x * (slope + curvature * x))

    def derivatives(self, x: ArrayLike, p: Parameters) -> tuple[Array, ...]:
        """Derivatives in the three coefficients."""
        x = as_array(x)
        return np.ones_like(x), x, x * x

    def slope(self, x: ArrayLike, p: Parameters) -> Array:
        """Derivative in the concentration."""
        return as_array(p[1] + 2.0 * p[2] * as_array(x))

    def inverse(self, y: ArrayLike, p: Parameters) -> Array:
        """Root on the arm whose slope has the sign of ``slope`` (the arm through x = 0).

        Written as 2c/(b + sqrt(b² + 4ac)), which does not cancel for small curvature.
        """
        intercept, slope, curvature = p
        c = as_array(y) - intercept
        with np.errstate(divide="ignore", invalid="ignore"):
            root = np.sqrt(slope * slope + 4.0 * curvature * c)
            return as_array(2.0 * c / (slope + np.where(slope < 0, -root, root)))

    def start(self, x: Array, y: Array) -> Array:
        """Any start will do: the coefficients are solved in closed form."""
        return np.zeros((3, y.shape[1]))

    def grid(self, x: Array) -> Array:
        """Nothing to search."""
        return np.empty((1, 0))

    def branch(self, p: Parameters, lowest: float, highest: float) -> tuple[float, float]:
        """The arm on which the larger part of the standards lies, up to the turning point."""
        slope, curvature = float(p[1]), float(p[2])
        if curvature == 0.0:
            return -np.inf, np.inf
        turn = -slope / (2.0 * curvature)
        return (-np.inf, turn) if turn >= 0.5 * (lowest + highest) else (turn, np.inf)
