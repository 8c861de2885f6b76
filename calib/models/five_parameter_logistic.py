"""Logistic curve in ln x with two plateaus and an asymmetry."""

from __future__ import annotations

from typing import ClassVar

import numpy as np
from numpy.typing import ArrayLike
from scipy.special import expit

from calib.models.response_model import (
    Array,
    Asymptote,
    Parameter,
    Parameters,
    ResponseModel,
    as_array,
    ends,
    half_response,
    positive_range,
    rows_of,
)


class FiveParameterLogistic(ResponseModel):
    """y = infinite + (zero − infinite)/(1 + (x/midpoint)^slope)^asymmetry, slope > 0.

    With asymmetry 1 it is the 4PL. The midpoint is not the half-response
    concentration; `half_response_concentration` is.
    """

    name = "5PL"
    formula = "infinite + (zero − infinite)/(1 + (x/midpoint)^slope)^asymmetry"
    plateau = True
    amplitude: ClassVar[dict[str, float]] = {"zero": 1.0, "infinite": -1.0}
    parameters: ClassVar[tuple[Parameter, ...]] = (
        Parameter("zero", "response at concentration 0", "response", linear=True),
        Parameter("infinite", "asymptote for large concentrations", "response", linear=True),
        Parameter("midpoint", "location on the concentration axis", "concentration", positive=True),
        Parameter("slope", "steepness in ln x", "1", 0.02, 100.0, positive=True),
        Parameter("asymmetry", "difference between the two bends", "1", 0.01, 100.0, positive=True),
    )

    def _distance(self, x: ArrayLike, p: Parameters) -> tuple[Array, Array]:
        """Ln x − ln midpoint, and slope times that (−inf at x = 0)."""
        x = as_array(x)
        above = x > 0
        if above.all():
            distance = np.log(x) - np.log(p[2])
            return distance, distance * p[3]
        distance = np.log(np.where(above, x, 1.0)) - np.log(p[2])
        return distance, np.where(above, distance * p[3], -np.inf)

    def _steps(self, x: ArrayLike, p: Parameters) -> tuple[Array, Array, Array]:
        """(ln x − ln midpoint), 1 − F and ln F with F = 1/(1 + (x/midpoint)^slope)."""
        distance, exponent = self._distance(x, p)
        return distance, as_array(expit(exponent)), as_array(-np.logaddexp(0.0, exponent))

    def response(self, x: ArrayLike, p: Parameters) -> Array:
        """Response at concentrations ``x`` >= 0; exactly ``zero`` at x = 0."""
        zero, infinite, _, _, asymmetry = p
        log_f = self._steps(x, p)[2]
        # Written from the zero response, so that x = 0 is exact.
        return as_array(zero + (zero - infinite) * np.expm1(asymmetry * log_f))

    def derivatives(self, x: ArrayLike, p: Parameters) -> tuple[Array, ...]:
        """Derivatives in zero, infinite, midpoint, slope and asymmetry."""
        zero, infinite, midpoint, slope, asymmetry = p
        distance, rest, log_f = self._steps(x, p)
        share = np.exp(asymmetry * log_f)
        fall = (zero - infinite) * asymmetry * share * rest
        return (
            share,
            -np.expm1(asymmetry * log_f),
            fall * (slope / midpoint),
            -fall * distance,
            (zero - infinite) * share * log_f,
        )

    def slope(self, x: ArrayLike, p: Parameters) -> Array:
        """Derivative in the concentration; infinite at x = 0 when slope < 1."""
        above = np.where(as_array(x) > 0, x, 1e-300)
        # A function of x/midpoint alone: what one gains the other loses.
        return as_array(self.derivatives(above, p)[2] * (-p[2] / above))

    def inverse(self, y: ArrayLike, p: Parameters) -> Array:
        """Exact inverse; nan on or beyond either plateau."""
        zero, infinite, midpoint, slope, asymmetry = p
        y = as_array(y)
        with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
            ratio = (zero - y) / (y - infinite)
            rise = np.expm1(np.log1p(ratio) / asymmetry)
            x = midpoint * np.abs(rise) ** (1.0 / slope)
            return as_array(np.where((ratio >= 0) & np.isfinite(ratio), x, np.nan))

    def start(self, x: Array, y: Array) -> Array:
        """Logit regression between plateaus set just outside the readings."""
        start = _logit_start(x, y)
        return np.vstack([start, np.ones(start.shape[1])])

    def grid(self, x: Array) -> Array:
        """Midpoint, slope and asymmetry on a coarse lattice around the standards."""
        return _lattice(_midpoints(x), np.geomspace(0.3, 10.0, 9), np.geomspace(0.25, 4.0, 5))

    def bounds(self, x: Array) -> tuple[Array, Array]:
        """The midpoint may leave the standards by five decades on either side."""
        lower, upper = super().bounds(x)
        low, high = positive_range(x)
        lower[2], upper[2] = low * 1e-5, high * 1e5
        return lower, upper

    def limit_at_zero(self, p: Parameters) -> Asymptote:
        """The zero response."""
        return Asymptote(float(p[0]), np.eye(len(self.parameters))[0])

    def limit_at_infinity(self, p: Parameters) -> Asymptote:
        """The response for large concentrations."""
        return Asymptote(float(p[1]), np.eye(len(self.parameters))[1])

    def half_response_concentration(self, p: Parameters) -> float:
        """Concentration half-way between the plateaus: C·(2^(1/g) − 1)^(1/b)."""
        return float(p[2] * np.expm1(np.log(2.0) / p[4]) ** (1.0 / p[3]))


def _midpoints(x: Array) -> Array:
    low, high = positive_range(x)
    return np.exp(np.linspace(np.log(low) - 2.0, np.log(high) + 2.0, 21))


def _lattice(*axes: Array) -> Array:
    return np.stack([a.ravel() for a in np.meshgrid(*axes, indexing="ij")], axis=-1)


def _logit_start(x: Array, y: Array) -> Array:
    """Zero, infinite, midpoint and slope (4, R); the linearised form serves as a start only."""
    low_end, high_end = ends(y)
    margin = 0.05 * (high_end - low_end)
    zero, infinite = low_end - margin, high_end + margin
    span = np.where(infinite != zero, infinite - zero, 1.0)
    used = np.isfinite(y) & (x > 0)
    share = np.clip(np.where(used, (y - zero) / span, 0.5), 0.01, 0.99)
    logit = np.log(share / (1.0 - share))
    log_x = np.broadcast_to(np.log(np.where(x > 0, x, 1.0)), y.shape)
    count = np.maximum(used.sum(axis=0), 1)
    mean_x = np.where(used, log_x, 0.0).sum(axis=0) / count
    mean_logit = np.where(used, logit, 0.0).sum(axis=0) / count
    across = np.where(used, log_x - mean_x, 0.0)
    spread = np.sum(across**2, axis=0)
    slope = np.sum(across * (logit - mean_logit), axis=0) / np.where(spread > 0, spread, 1.0)
    usable = (slope > 0.05) & (infinite != zero)
    steep = np.where(usable, np.minimum(slope, 20.0), 1.0)
    middle = np.where(usable, np.exp(mean_x - mean_logit / steep), half_response(x, y))
    return rows_of(zero, infinite, middle, steep)
