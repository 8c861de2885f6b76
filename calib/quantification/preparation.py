"""Solutions prepared from a certified stock: their value, and which uncertainties they share.

A prepared solution is its parent times volume taken over volume made up to, so relative
uncertainties add in quadrature along the tree (JCGM 100:2008, 5.1.6). Each certificate and each
volume is a part of its own; solutions that descend from one stock share the parts they have in
common, and are correlated through them.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calib.curves.curve import Curve
from calib.errors import InputError
from calib.quantification.budget import Component, CurveComponent, effective_freedom_of

Array = NDArray[np.float64]

LEVELS = "preparation of the levels"


@dataclass(frozen=True, slots=True)
class Volume:
    """An amount measured out, with its standard uncertainty, in any one unit."""

    amount: float
    u: float

    def __post_init__(self) -> None:
        if not (np.isfinite(self.amount) and self.amount > 0):
            raise InputError(f"a volume of {self.amount:g} cannot be measured out; give one above 0")
        if not (np.isfinite(self.u) and 0 <= self.u < self.amount):
            raise InputError(
                f"a standard uncertainty of {self.u:g} for a volume of {self.amount:g} is not possible; "
                "give one of at least 0 and below the volume"
            )


@dataclass(frozen=True, slots=True)
class Solution:
    """A solution of known concentration.

    Attributes
    ----------
    value : float
        In the unit of the certificate.
    parts : tuple of Component
        Independent relative uncertainties; two solutions share the parts of the same name.
    """

    value: float
    parts: tuple[Component, ...]

    @property
    def relative_u(self) -> float:
        """Combined relative standard uncertainty."""
        return float(np.sqrt(sum(p.relative_u**2 for p in self.parts)))

    @property
    def u(self) -> float:
        """Combined standard uncertainty, in the unit of the value."""
        return self.value * self.relative_u

    @property
    def degrees_of_freedom(self) -> float:
        """Effective degrees of freedom (Welch–Satterthwaite)."""
        return effective_freedom_of(self.parts)


def certified(name: str, value: float, u: float, degrees_of_freedom: float = np.inf) -> Solution:
    """The solution a certificate speaks of.

    Parameters
    ----------
    name : str
        Of the lot.
    value, u : float
        Certified value and its standard uncertainty, U/k.
    degrees_of_freedom : float
        Infinite unless the certificate states them.

    Examples
    --------
    >>> round(certified("A-1", 1000.0, 2.0).relative_u, 6)
    0.002
    """
    return Solution(value, (Component(f"certified value of {name}", u / value, degrees_of_freedom),))


def diluted(parent: Solution, name: str, taken: Volume, made_up_to: Volume) -> Solution:
    """A solution prepared from another one.

    Parameters
    ----------
    parent : Solution
    name : str
        Of the new solution; its two volumes are parts of this name.
    taken, made_up_to : Volume
        In the same unit.

    Raises
    ------
    InputError
        When more is taken than made up to.

    Examples
    --------
    >>> stock = certified("A-1", 1000.0, 2.0)
    >>> work = diluted(stock, "W-1", Volume(1.0, 0.006), Volume(100.0, 0.05))
    >>> round(work.value, 6), round(work.u, 4)
    (10.0, 0.0634)
    """
    if taken.amount > made_up_to.amount:
        raise InputError(
            f"solution '{name}': {taken.amount:g} taken cannot be made up to {made_up_to.amount:g}; exchange them"
        )
    return Solution(
        parent.value * (taken.amount / made_up_to.amount),
        (
            *parent.parts,
            Component(f"volume taken for {name}", taken.u / taken.amount),
            Component(f"volume {name} was made up to", made_up_to.u / made_up_to.amount),
        ),
    )


def shared_parts(solutions: Sequence[Solution]) -> tuple[Component, ...]:
    """Parts that all of the solutions have in common."""
    return tuple(p for p in solutions[0].parts if all(p in s.parts for s in solutions[1:]))


def own_covariance(solutions: Sequence[Solution]) -> Array:
    """Relative covariance (n, n) of what the solutions do not all share.

    Two of them are correlated through the parts that both have (serial dilution); the same
    solution named twice is fully correlated with itself.
    """
    common = shared_parts(solutions)
    own = [{p.name: p.relative_u**2 for p in s.parts if p not in common} for s in solutions]
    return np.array([[sum(v for name, v in a.items() if name in b) for b in own] for a in own], dtype=float)


def carried_into_curve(curve: Curve, covariance: Array) -> CurveComponent:
    """What uncertain levels do to the curve fitted to them.

    By the implicit function theorem on the weighted normal equations, dθ/dx_i = −V·J_i·w_i·f'_i/s²,
    where V = cov(θ) and s² its scale: a level that is higher than stated moves the curve towards it.

    Parameters
    ----------
    curve : Curve
    covariance : (n, n) array
        Relative covariance of the concentrations of the curve's standard readings. Leave out what
        all levels share: it stretches the whole axis, and is a component of its own.
    """
    x = curve.standards.concentration
    mean = curve.predict(x)
    j = curve.response_model.gradient(x, curve.values)
    pull = curve.response_model.slope(x, curve.values) * x / curve.noise.at_standards(mean, x)
    effect = curve.covariance @ (j * pull[:, None]).T / curve.scale**2
    return CurveComponent(LEVELS, effect @ covariance @ effect.T)


@dataclass(frozen=True, slots=True, eq=False)
class UncertainLevels:
    """Levels of a standards ladder with what each of them is uncertain by for itself.

    Attributes
    ----------
    levels : (l,) array
        Concentrations as they stand in the runs.
    covariance : (l, l) array
        Relative covariance of the levels, without what all of them share.
    """

    levels: Array
    covariance: Array

    def on(self, curve: Curve) -> CurveComponent:
        """What they do to a curve; replicate readings of one level share its deviation."""
        x = curve.standards.concentration
        found = (x[:, None] == self.levels[None, :]).astype(np.float64)
        return carried_into_curve(curve, found @ self.covariance @ found.T)
