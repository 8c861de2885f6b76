"""Exponential approach to a plateau."""

from __future__ import annotations

from typing import ClassVar

import numpy as np
from numpy.typing import ArrayLike

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


class FirstOrder(ResponseModel):
    """y = offset + amplitude·(1 − exp(−rate·x))."""

    name = "first-order"
    formula = "offset + amplitude·(1 − exp(−rate·x))"
    plateau = True
    amplitude: ClassVar[dict[str, float]] = {"amplitude": 1.0}
    parameters = (
        Parameter("offset", "response at concentration 0", "response", linear=True),
        Parameter("amplitude", "response between offset and plateau", "response", linear=True),
        Parameter("rate", "initial slope over amplitude", "1/concentration", positive=True),
    )

    def response(self, x: ArrayLike, p: Parameters) -> Array:
        """Response at concentrations ``x`` >= 0."""
        offset, amplitude, rate = p
        return as_array(offset - amplitude * np.expm1(-rate * as_array(x)))

    def derivatives(self, x: ArrayLike, p: Parameters) -> tuple[Array, ...]:
        """Derivatives in offset, amplitude and rate."""
        _, amplitude, rate = p
        x = as_array(x)
        share = -np.expm1(-rate * x)
        return np.ones_like(share), share, amplitude * x * np.exp(-rate * x)

    def slope(self, x: ArrayLike, p: Parameters) -> Array:
        """Derivative in the concentration."""
        _, amplitude, rate = p
        return as_array(amplitude * rate * np.exp(-rate * as_array(x)))

    def inverse(self, y: ArrayLike, p: Parameters) -> Array:
        """Exact inverse; nan on or beyond the plateau and below the offset."""
        offset, amplitude, rate = p
        with np.errstate(divide="ignore", invalid="ignore"):
            share = (as_array(y) - offset) / amplitude
            x = -np.log1p(-share) / rate
            return as_array(np.where((share >= 0) & (share < 1), x, np.nan))

    def start(self, x: Array, y: Array) -> Array:
        """Rate from the half-way concentration; the rest follows in closed form."""
        low_end, high_end = ends(y)
        return rows_of(low_end, 1.2 * (high_end - low_end), np.log(2.0) / half_response(x, y))

    def grid(self, x: Array) -> Array:
        """Rates from nearly a line to a plateau reached at the lowest standard."""
        low, high = positive_range(x)
        return np.geomspace(0.02 / high, 20.0 / low, 31)[:, None]

    def bounds(self, x: Array) -> tuple[Array, Array]:
        """The rate may leave the standards by five decades on either side."""
        lower, upper = super().bounds(x)
        low, high = positive_range(x)
        lower[2], upper[2] = 1e-5 / high, 1e5 / low
        return lower, upper

    def limit_at_zero(self, p: Parameters) -> Asymptote:
        """The offset."""
        return Asymptote(float(p[0]), np.array([1.0, 0.0, 0.0]))

    def limit_at_infinity(self, p: Parameters) -> Asymptote:
        """Offset plus amplitude."""
        return Asymptote(float(p[0] + p[1]), np.array([1.0, 1.0, 0.0]))
