"""Logistic curve in ln x with two plateaus."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike
from scipy.special import expit

from calib.models.five_parameter_logistic import FiveParameterLogistic, _lattice, _logit_start, _midpoints
from calib.models.response_model import Array, Parameter, Parameters, as_array


class FourParameterLogistic(FiveParameterLogistic):
    """y = infinite + (zero − infinite)/(1 + (x/midpoint)^slope), slope > 0.

    ``zero`` is the response at x = 0 and ``infinite`` the asymptote for large x,
    whichever is higher, so that one curve has one description.
    """

    name = "4PL"
    formula = "infinite + (zero − infinite)/(1 + (x/midpoint)^slope)"
    parameters = (
        *FiveParameterLogistic.parameters[:2],
        Parameter("midpoint", "concentration half-way between the plateaus", "concentration", positive=True),
        FiveParameterLogistic.parameters[3],
    )

    def response(self, x: ArrayLike, p: Parameters) -> Array:
        """Response at concentrations ``x`` >= 0; exactly ``zero`` at x = 0."""
        zero, infinite = p[0], p[1]
        return as_array(zero + (infinite - zero) * expit(self._distance(x, p)[1]))

    def derivatives(self, x: ArrayLike, p: Parameters) -> tuple[Array, ...]:
        """Derivatives in zero, infinite, midpoint and slope."""
        zero, infinite, midpoint, slope = p
        distance, exponent = self._distance(x, p)
        # One exponential serves both; past 700 the share is zero to every digit that matters.
        power = np.exp(np.minimum(exponent, 700.0))
        share = 1.0 / (1.0 + power)
        rest = power * share
        fall = (share * rest) * (zero - infinite)
        return share, rest, fall * (slope / midpoint), fall * -distance

    def inverse(self, y: ArrayLike, p: Parameters) -> Array:
        """Exact inverse; nan on or beyond either plateau."""
        zero, infinite, midpoint, slope = p
        y = as_array(y)
        with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
            ratio = (zero - y) / (y - infinite)
            x = midpoint * np.abs(ratio) ** (1.0 / slope)
            return as_array(np.where((ratio >= 0) & np.isfinite(ratio), x, np.nan))

    def start(self, x: Array, y: Array) -> Array:
        """Logit regression between plateaus set just outside the readings."""
        return _logit_start(x, y)

    def grid(self, x: Array) -> Array:
        """Midpoint and slope on a coarse lattice around the standards."""
        return _lattice(_midpoints(x), np.geomspace(0.3, 10.0, 9))

    def half_response_concentration(self, p: Parameters) -> float:
        """The midpoint itself."""
        return float(p[2])
