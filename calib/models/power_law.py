"""Power law."""

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
    rows_of,
)


class PowerLaw(ResponseModel):
    """y = offset + scale·x^exponent, exponent > 0 (Freundlich form)."""

    name = "power-law"
    formula = "offset + scale·x^exponent"
    amplitude: ClassVar[dict[str, float]] = {"scale": 1.0}
    parameters = (
        Parameter("offset", "response at concentration 0", "response", linear=True),
        Parameter("scale", "response above the offset at concentration 1", "response", linear=True),
        Parameter("exponent", "curvature on the logarithmic axes", "1", 1e-3, 30.0, positive=True),
    )

    def response(self, x: ArrayLike, p: Parameters) -> Array:
        """Response at concentrations ``x`` >= 0."""
        offset, scale, exponent = p
        return as_array(offset + scale * as_array(x) ** exponent)

    def derivatives(self, x: ArrayLike, p: Parameters) -> tuple[Array, ...]:
        """Derivatives in offset, scale and exponent."""
        _, scale, exponent = p
        x = as_array(x)
        power = x**exponent
        log_x = np.log(np.where(x > 0, x, 1.0))
        return np.ones_like(power), power, scale * power * log_x

    def slope(self, x: ArrayLike, p: Parameters) -> Array:
        """Derivative in the concentration."""
        _, scale, exponent = p
        with np.errstate(divide="ignore"):
            return as_array(scale * exponent * as_array(x) ** (exponent - 1.0))

    def inverse(self, y: ArrayLike, p: Parameters) -> Array:
        """Exact inverse; nan on the far side of the offset."""
        offset, scale, exponent = p
        with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
            ratio = (as_array(y) - offset) / scale
            return as_array(np.where(ratio >= 0, np.abs(ratio) ** (1.0 / exponent), np.nan))

    def start(self, x: Array, y: Array) -> Array:
        """Exponent 1: the other two follow in closed form."""
        low_end, high_end = ends(y)
        return rows_of(low_end, high_end - low_end, 1.0)

    def grid(self, x: Array) -> Array:
        """Exponents from strongly bent down to strongly bent up."""
        return np.geomspace(0.1, 8.0, 25)[:, None]

    def limit_at_zero(self, p: Parameters) -> Asymptote:
        """The offset."""
        return Asymptote(float(p[0]), np.array([1.0, 0.0, 0.0]))
