"""Luminescence quenching."""

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


class Quenching(ResponseModel):
    """y = offset + unquenched/(1 + quenching_constant·x) (Stern–Volmer).

    The offset is 0 (dark signal subtracted) unless bounds or a start free it: with a
    free offset this is the saturation family again.
    """

    name = "quenching"
    formula = "offset + unquenched/(1 + quenching_constant·x)"
    plateau = True
    amplitude: ClassVar[dict[str, float]] = {"unquenched": 1.0}
    fixed_by_default: ClassVar[dict[str, float]] = {"offset": 0.0}
    parameters = (
        Parameter("offset", "dark signal left in the response", "response", linear=True),
        Parameter("unquenched", "response above the offset at concentration 0", "response", linear=True),
        Parameter("quenching_constant", "Stern–Volmer constant", "1/concentration", positive=True),
    )

    def response(self, x: ArrayLike, p: Parameters) -> Array:
        """Response at concentrations ``x`` >= 0."""
        offset, unquenched, constant = p
        return as_array(offset + unquenched / (1.0 + constant * as_array(x)))

    def derivatives(self, x: ArrayLike, p: Parameters) -> tuple[Array, ...]:
        """Derivatives in offset, unquenched and quenching_constant."""
        _, unquenched, constant = p
        x = as_array(x)
        share = 1.0 / (1.0 + constant * x)
        return np.ones_like(share), share, -unquenched * x * share * share

    def slope(self, x: ArrayLike, p: Parameters) -> Array:
        """Derivative in the concentration."""
        _, unquenched, constant = p
        return as_array(-unquenched * constant / (1.0 + constant * as_array(x)) ** 2)

    def inverse(self, y: ArrayLike, p: Parameters) -> Array:
        """Exact inverse; nan beyond the zero response and on or below the offset."""
        offset, unquenched, constant = p
        above = as_array(y) - offset
        with np.errstate(divide="ignore", invalid="ignore"):
            ratio = (unquenched - above) / above
            return as_array(np.where((ratio >= 0) & np.isfinite(ratio), ratio / constant, np.nan))

    def start(self, x: Array, y: Array) -> Array:
        """Constant from the half-way concentration; the rest follows in closed form."""
        return rows_of(0.0, ends(y)[0], 1.0 / half_response(x, y))

    def grid(self, x: Array) -> Array:
        """Constants from hardly quenched to quenched at the lowest standard."""
        low, high = positive_range(x)
        return np.geomspace(0.02 / high, 20.0 / low, 31)[:, None]

    def bounds(self, x: Array) -> tuple[Array, Array]:
        """The constant may leave the standards by five decades on either side."""
        lower, upper = super().bounds(x)
        low, high = positive_range(x)
        lower[2], upper[2] = 1e-5 / high, 1e5 / low
        return lower, upper

    def limit_at_zero(self, p: Parameters) -> Asymptote:
        """Offset plus the unquenched response."""
        return Asymptote(float(p[0] + p[1]), np.array([1.0, 1.0, 0.0]))

    def limit_at_infinity(self, p: Parameters) -> Asymptote:
        """The offset."""
        return Asymptote(float(p[0]), np.array([1.0, 0.0, 0.0]))
