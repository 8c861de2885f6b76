"""Uncertainty components and their effective degrees of freedom."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calib.errors import InputError

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Component:
    """A further uncertainty of the concentration, beside reading and curve.

    Attributes
    ----------
    name : str
    relative_u : float
        Relative standard uncertainty, a fraction.
    degrees_of_freedom : float
        Infinite when it is known.
    """

    name: str
    relative_u: float
    degrees_of_freedom: float = np.inf

    def __post_init__(self) -> None:
        if not (np.isfinite(self.relative_u) and self.relative_u >= 0):
            raise InputError(
                f"component '{self.name}': relative_u = {self.relative_u} must be finite and >= 0"
            )
        if not self.degrees_of_freedom > 0:
            raise InputError(f"component '{self.name}': degrees_of_freedom must be above 0")


def effective_freedom(
    relative_variance: Array, degrees_of_freedom: float, components: Sequence[Component]
) -> Array:
    """Welch–Satterthwaite degrees of freedom (JCGM 100:2008, G.4, eq. G.2b).

    Parameters
    ----------
    relative_variance : (m,) array
        Squared relative standard uncertainty from reading and curve.
    degrees_of_freedom : float
        Behind that variance.
    components : sequence of Component
    """
    total = relative_variance + sum(c.relative_u**2 for c in components)
    with np.errstate(divide="ignore", invalid="ignore"):
        denominator = relative_variance**2 / degrees_of_freedom + sum(
            c.relative_u**4 / c.degrees_of_freedom for c in components
        )
        nu = np.where(denominator > 0, total**2 / denominator, np.inf)
    return np.asarray(np.where(np.isnan(relative_variance), degrees_of_freedom, nu), dtype=np.float64)
