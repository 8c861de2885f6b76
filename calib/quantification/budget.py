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
    spread : float, optional
        Relative standard deviation the degrees of freedom belong to, where that is not
        ``relative_u`` itself: a component estimated as a difference of two variances is as
        uncertain as the larger of them.
    """

    name: str
    relative_u: float
    degrees_of_freedom: float = np.inf
    spread: float | None = None

    def __post_init__(self) -> None:
        if not (np.isfinite(self.relative_u) and self.relative_u >= 0):
            raise InputError(
                f"component '{self.name}': relative_u = {self.relative_u} must be finite and >= 0"
            )
        if not self.degrees_of_freedom > 0:
            raise InputError(f"component '{self.name}': degrees_of_freedom must be above 0")
        if self.spread is not None and not (np.isfinite(self.spread) and self.spread >= self.relative_u):
            raise InputError(
                f"component '{self.name}': spread = {self.spread} must be finite and at least relative_u"
            )

    @property
    def doubt(self) -> float:
        """Fourth power of what was estimated over its degrees of freedom, as Welch and Satterthwaite add it."""
        estimated = self.relative_u if self.spread is None else self.spread
        return float(estimated**4 / self.degrees_of_freedom)


def effective_freedom_of(components: Sequence[Component]) -> float:
    """Welch–Satterthwaite degrees of freedom of components alone; infinite where all are known.

    Examples
    --------
    >>> round(effective_freedom_of([Component("a", 0.03, 5.0), Component("b", 0.04)]), 3)
    38.58
    """
    doubt = sum(c.doubt for c in components)
    total = sum(c.relative_u**2 for c in components)
    return float(total**2 / doubt) if doubt > 0 else float(np.inf)


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
        denominator = relative_variance**2 / degrees_of_freedom + sum(c.doubt for c in components)
        nu = np.where(denominator > 0, total**2 / denominator, np.inf)
    return np.asarray(np.where(np.isnan(relative_variance), degrees_of_freedom, nu), dtype=np.float64)
