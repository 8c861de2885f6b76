"""The contract of a response model: what a file in this folder must declare.

Parameters travel as one sequence ``p`` in the declared order. Each element is a
number, or an array that broadcasts against the concentrations, so that a stack of
curves is evaluated by the same expressions as a single one.
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any, ClassVar

import numpy as np
from numpy.typing import ArrayLike, NDArray

Array = NDArray[np.float64]
Parameters = Sequence[Any] | Array


@dataclass(frozen=True, slots=True)
class Parameter:
    """One parameter of a response model.

    Attributes
    ----------
    name : str
        Public name.
    meaning : str
        What it is, in words.
    unit_of : str
        Its unit in terms of the response and the concentration ("1": none).
    lower, upper : float
        Wide sanity bounds; they only keep the solver out of nonsense.
    positive : bool
        Solved in its logarithm.
    linear : bool
        The response is linear in it when the others are held.
    """

    name: str
    meaning: str
    unit_of: str
    lower: float = -np.inf
    upper: float = np.inf
    positive: bool = False
    linear: bool = False


@dataclass(frozen=True, slots=True)
class Asymptote:
    """A finite limit of the response, with its gradient in the parameters."""

    response: float
    gradient: Array


class ResponseModel(ABC):
    """A response y(x, p), everything the solver and the inversion need of it.

    ``logarithmic`` says that the model lives on x >= 0 and is inverted in ln x;
    otherwise it is inverted on the plain x axis. ``plateau`` says that it has an
    asymptote which the standards ought to reach.
    """

    name: ClassVar[str]
    formula: ClassVar[str]
    parameters: ClassVar[tuple[Parameter, ...]]
    logarithmic: ClassVar[bool] = True
    plateau: ClassVar[bool] = False
    fixed_by_default: ClassVar[dict[str, float]] = {}
    # The response is linear in its linear parameters, and its derivatives in the other ones are
    # proportional to one combination of them: weights by name (empty where there are no others).
    amplitude: ClassVar[dict[str, float]] = {}

    @abstractmethod
    def response(self, x: ArrayLike, p: Parameters) -> Array:
        """Response at concentrations ``x`` (any shape)."""

    @abstractmethod
    def derivatives(self, x: ArrayLike, p: Parameters) -> tuple[Array, ...]:
        """Derivatives in each parameter, arrays that broadcast against the response."""

    def gradient(self, x: ArrayLike, p: Parameters) -> Array:
        """Derivatives in the parameters, shape of the response + (k,)."""
        shape = np.broadcast_shapes(np.shape(x), *(np.shape(v) for v in p))
        return np.stack([np.broadcast_to(d, shape) for d in self.derivatives(x, p)], axis=-1)

    @abstractmethod
    def slope(self, x: ArrayLike, p: Parameters) -> Array:
        """Derivative of the response in the concentration."""

    @abstractmethod
    def inverse(self, y: ArrayLike, p: Parameters) -> Array:
        """Concentration of response ``y``; nan where the curve never reaches it."""

    @abstractmethod
    def start(self, x: Array, y: Array) -> Array:
        """Data-driven start values (k, R) of R runs.

        ``x`` (n, 1) or (n, R) rises along the first axis; ``y`` (n, R) is nan where a
        reading is absent.
        """

    @abstractmethod
    def grid(self, x: Array) -> Array:
        """Candidates (cells, q) for the q parameters that are not linear."""

    def limit_at_zero(self, p: Parameters) -> Asymptote | None:
        """Limit of the response at the low end of the axis, where finite."""
        return None

    def limit_at_infinity(self, p: Parameters) -> Asymptote | None:
        """Limit of the response for large concentrations, where finite."""
        return None

    def branch(self, p: Parameters, lowest: float, highest: float) -> tuple[float, float]:
        """Interval of x on which the response is monotone, around the standards."""
        return (0.0 if self.logarithmic else -np.inf), np.inf

    def bounds(self, x: Array) -> tuple[Array, Array]:
        """Lower and upper sanity bounds (k,) for standards at ``x``."""
        return (
            np.array([q.lower for q in self.parameters], dtype=np.float64),
            np.array([q.upper for q in self.parameters], dtype=np.float64),
        )

    @cached_property
    def names(self) -> tuple[str, ...]:
        """Parameter names in order."""
        return tuple(q.name for q in self.parameters)

    @cached_property
    def linear(self) -> NDArray[np.bool_]:
        """Which parameters the response is linear in (k,)."""
        return np.array([q.linear for q in self.parameters])

    @cached_property
    def positive(self) -> NDArray[np.bool_]:
        """Which parameters are solved in their logarithm (k,)."""
        return np.array([q.positive for q in self.parameters])

    def index(self, name: str) -> int:
        """Position of a parameter."""
        return self.names.index(name)


def as_array(x: ArrayLike) -> Array:
    """Float64 view of anything array-like."""
    return np.asarray(x, dtype=np.float64)


def positive_range(x: Array) -> tuple[float, float]:
    """Lowest and highest concentration above zero."""
    above = x[x > 0]
    return (float(above.min()), float(above.max())) if above.size else (1.0, 1.0)


def ends(y: Array) -> tuple[Array, Array]:
    """First and last response present in each run (R,)."""
    present = np.isfinite(y)
    rows = np.arange(y.shape[1])
    first = present.argmax(axis=0)
    last = y.shape[0] - 1 - present[::-1].argmax(axis=0)
    return y[first, rows], y[last, rows]


def half_response(x: Array, y: Array) -> Array:
    """Concentration at which each run is half-way between its ends (R,), above zero."""
    low_end, high_end = ends(y)
    sign = np.where(high_end >= low_end, 1.0, -1.0)
    height = np.fmax.accumulate(sign * (y - 0.5 * (low_end + high_end)), axis=0)
    rows = np.arange(y.shape[1])
    after = np.clip((height >= 0).argmax(axis=0), 1, y.shape[0] - 1)
    levels = np.broadcast_to(x, y.shape)
    x0, x1 = levels[after - 1, rows], levels[after, rows]
    y0, y1 = height[after - 1, rows], height[after, rows]
    with np.errstate(divide="ignore", invalid="ignore"):
        share = np.where(y1 > y0, np.clip(-y0 / (y1 - y0), 0.0, 1.0), 0.5)
    guess = x0 + np.where(np.isfinite(share), share, 0.5) * (x1 - x0)
    high = levels.max(axis=0)
    low = np.min(np.where(levels > 0, levels, high), axis=0)
    return as_array(np.clip(np.where(np.isfinite(guess), guess, low), low, high))


def rows_of(*values: Array | float) -> Array:
    """Stack start values of the parameters: (k, R)."""
    return np.array(np.broadcast_arrays(*values), dtype=np.float64)
