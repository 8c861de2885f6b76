"""Hyperbolic saturation."""

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


class Saturation(ResponseModel):
    """y = offset + capacity·x/(half + x) (Michaelis–Menten, Langmuir form)."""

    name = "saturation"
    formula = "offset + capacity·x/(half + x)"
    plateau = True
    amplitude: ClassVar[dict[str, float]] = {"capacity": 1.0}
    parameters = (
        Parameter("offset", "response at concentration 0", "response", linear=True),
        Parameter("capacity", "response between offset and plateau", "response", linear=True),
        Parameter("half", "concentration of half the capacity", "concentration", positive=True),
    )

    def response(self, x: ArrayLike, p: Parameters) -> Array:
        """Response at concentrations ``x`` >= 0."""
        offset, capacity, half = p
        x = as_array(x)
        return as_array(offset + capacity * (x / (half + x)))

    def derivatives(self, x: ArrayLike, p: Parameters) -> tuple[Array, ...]:
        """Derivatives in offset, capacity and half."""
        _, capacity, half = p
        x = as_array(x)
        share = x / (half + x)
        return np.ones_like(share), share, -capacity * share / (half + x)

    def slope(self, x: ArrayLike, p: Parameters) -> Array:
        """Derivative in the concentration."""
        _, capacity, half = p
        return as_array(capacity * half / (half + as_array(x)) ** 2)

    def inverse(self, y: ArrayLike, p: Parameters) -> Array:
        """Exact inverse; nan on or beyond the plateau and below the offset."""
        offset, capacity, half = p
        y = as_array(y)
        with np.errstate(divide="ignore", invalid="ignore"):
            ratio = (y - offset) / (offset + capacity - y)
            return as_array(np.where((ratio >= 0) & np.isfinite(ratio), half * ratio, np.nan))

    def start(self, x: Array, y: Array) -> Array:
        """Half where the standards are half-way; the rest follows in closed form."""
        low_end, high_end = ends(y)
        return rows_of(low_end, 1.5 * (high_end - low_end), half_response(x, y))

    def grid(self, x: Array) -> Array:
        """Half from well below the lowest to far above the highest standard."""
        low, high = positive_range(x)
        return np.geomspace(low * 0.05, high * 50.0, 31)[:, None]

    def bounds(self, x: Array) -> tuple[Array, Array]:
        """Half may leave the standards by five decades on either side."""
        lower, upper = super().bounds(x)
        low, high = positive_range(x)
        lower[2], upper[2] = low * 1e-5, high * 1e5
        return lower, upper

    def limit_at_zero(self, p: Parameters) -> Asymptote:
        """The offset."""
        return Asymptote(float(p[0]), np.array([1.0, 0.0, 0.0]))

    def limit_at_infinity(self, p: Parameters) -> Asymptote:
        """Offset plus capacity."""
        return Asymptote(float(p[0] + p[1]), np.array([1.0, 1.0, 0.0]))
