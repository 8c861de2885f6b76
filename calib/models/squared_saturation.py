"""Saturation with the square of the concentration."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from calib.models.response_model import Array, Parameter, Parameters, as_array
from calib.models.saturation import Saturation


class SquaredSaturation(Saturation):
    """y = offset + capacity·x²/(half² + x²) (Hill form with coefficient 2)."""

    name = "squared-saturation"
    formula = "offset + capacity·x²/(half² + x²)"
    parameters = (
        Parameter("offset", "response at concentration 0", "response", linear=True),
        Parameter("capacity", "response between offset and plateau", "response", linear=True),
        Parameter("half", "concentration of half the capacity", "concentration", positive=True),
    )

    def response(self, x: ArrayLike, p: Parameters) -> Array:
        """Response at concentrations ``x`` >= 0."""
        offset, capacity, half = p
        square = as_array(x) ** 2
        return as_array(offset + capacity * (square / (half * half + square)))

    def derivatives(self, x: ArrayLike, p: Parameters) -> tuple[Array, ...]:
        """Derivatives in offset, capacity and half."""
        _, capacity, half = p
        square = as_array(x) ** 2
        total = half * half + square
        share = square / total
        return np.ones_like(share), share, -2.0 * capacity * half * share / total

    def slope(self, x: ArrayLike, p: Parameters) -> Array:
        """Derivative in the concentration."""
        _, capacity, half = p
        x = as_array(x)
        return as_array(2.0 * capacity * half * half * x / (half * half + x * x) ** 2)

    def inverse(self, y: ArrayLike, p: Parameters) -> Array:
        """Exact inverse; nan on or beyond the plateau and below the offset."""
        offset, capacity, half = p
        y = as_array(y)
        with np.errstate(divide="ignore", invalid="ignore"):
            ratio = (y - offset) / (offset + capacity - y)
            root = half * np.sqrt(np.abs(ratio))
            return as_array(np.where((ratio >= 0) & np.isfinite(ratio), root, np.nan))
