"""Uncertainty components and their effective degrees of freedom."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from calib.curves.curve import Curve
from calib.errors import InputError

Array = NDArray[np.float64]

READING = "repeatability of the reading"
CURVE = "curve"


class FurtherUncertainty(Protocol):
    """What adds to the uncertainty of a concentration beside reading and curve."""

    @property
    def name(self) -> str:
        """Of the component in a budget."""
        ...

    @property
    def degrees_of_freedom(self) -> float:
        """Behind its estimate; infinite when it is known."""
        ...

    def response_variance(self, curve: Curve, x: Array) -> Array:
        """Its variance at concentrations x (any shape), in terms of the response."""
        ...

    def estimated_variance(self, curve: Curve, x: Array) -> Array:
        """The variance that was estimated with its degrees of freedom, in terms of the response."""
        ...

    def parameter_covariance(self, curve: Curve) -> Array | None:
        """Covariance of the curve's parameters it stands for; None for a relative one."""
        ...


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
    def estimated(self) -> float:
        """Relative standard deviation the degrees of freedom belong to."""
        return self.relative_u if self.spread is None else self.spread

    def response_variance(self, curve: Curve, x: Array) -> Array:
        """(x f'(x))² times the squared relative uncertainty."""
        return self._of(curve, x, self.relative_u)

    def estimated_variance(self, curve: Curve, x: Array) -> Array:
        """(x f'(x))² times the squared relative deviation that was estimated."""
        return self._of(curve, x, self.estimated)

    def parameter_covariance(self, curve: Curve) -> Array | None:
        """None: it belongs to the concentration."""
        return None

    def _of(self, curve: Curve, x: Array, relative: float) -> Array:
        return np.asarray((x * curve.response_model.slope(x, curve.values) * relative) ** 2)


@dataclass(frozen=True, slots=True, eq=False)
class CurveComponent:
    """A further uncertainty of the curve itself, as a covariance of its parameters.

    Attributes
    ----------
    name : str
    covariance : (k, k) array
        Of all parameters of the model, zero for fixed ones.
    degrees_of_freedom : float
    """

    name: str
    covariance: Array
    degrees_of_freedom: float = np.inf

    def response_variance(self, curve: Curve, x: Array) -> Array:
        """J C J'."""
        j = curve.response_model.gradient(np.asarray(x, dtype=np.float64), curve.values)
        return np.asarray(np.einsum("...i,ij,...j->...", j, self.covariance, j))

    def estimated_variance(self, curve: Curve, x: Array) -> Array:
        """J C J'."""
        return self.response_variance(curve, x)

    def parameter_covariance(self, curve: Curve) -> Array | None:
        """C."""
        return self.covariance


def budget_parts(
    curve: Curve, value: Array, replicates: Array, components: Sequence[FurtherUncertainty]
) -> dict[str, Array]:
    """Standard uncertainty of each component at concentrations read from a curve; their squares add up.

    Parameters
    ----------
    curve : Curve
    value : (m,) array
        Concentrations.
    replicates : (m,) array
        Readings behind each.
    components : sequence
        Beside reading and curve.
    """
    variances = {READING: curve.reading_variance(value) / replicates, CURVE: curve.fit_variance(value)}
    variances |= {c.name: c.response_variance(curve, value) for c in components}
    with np.errstate(divide="ignore", invalid="ignore"):
        slope = np.abs(curve.response_model.slope(value, curve.values))
        return {name: np.sqrt(v) / slope for name, v in variances.items()}


def effective_freedom_of(components: Sequence[Component]) -> float:
    """Welch–Satterthwaite degrees of freedom of components alone; infinite where all are known.

    Examples
    --------
    >>> round(effective_freedom_of([Component("a", 0.03, 5.0), Component("b", 0.04)]), 3)
    38.58
    """
    variances = [np.array(c.relative_u**2) for c in components]
    estimated = [np.array(c.estimated**2) for c in components]
    return float(effective_freedom(variances, estimated, [c.degrees_of_freedom for c in components]))


def effective_freedom(
    variances: Sequence[Array], estimated: Sequence[Array], degrees_of_freedom: Sequence[float]
) -> Array:
    """Welch–Satterthwaite degrees of freedom (JCGM 100:2008, G.4, eq. G.2b).

    Parameters
    ----------
    variances : sequence of (m,) arrays
        Squared standard uncertainty of each component, in any common unit.
    estimated : sequence of (m,) arrays
        Variance each component's degrees of freedom belong to; mostly the same.
    degrees_of_freedom : sequence of float
        Of each component.

    Returns
    -------
    (m,) array
        Infinite where nothing was estimated; that of the first component where nothing can be said.
    """
    total = sum(variances[1:], start=variances[0])
    with np.errstate(divide="ignore", invalid="ignore"):
        doubt = sum(
            (v**2 / nu for v, nu in zip(estimated, degrees_of_freedom, strict=True)),
            start=np.zeros_like(total),
        )
        nu = np.where(doubt > 0, total**2 / doubt, np.inf)
    return np.asarray(np.where(np.isnan(total), degrees_of_freedom[0], nu), dtype=np.float64)
