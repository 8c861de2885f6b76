"""What happens to each parameter in a solve, and when a solve stops."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from functools import lru_cache

from calib.models import ResponseModel

# Elimination from inner products is trusted while this share of every squared length is left.
SOUND = 1e-8
# And a sum of squares while this share of it is left.
EXACT = 1e-4


@dataclass(frozen=True, slots=True)
class Rules:
    """Numbers that steer a solve.

    Attributes
    ----------
    steps : int
        Most steps of one run.
    enough : float
        A predicted decrease of this share of the weighted sum, pure error included, moves a
        parameter by about a hundred-millionth of its standard error; one full step follows.
    floor : float
        The same for noise-free data, as a share of the weighted squares of the responses.
    close : float
        Below this share a decrease of the sum is lost in its rounding.
    near : float
        A step of so small a share of the sum lies where the gradient tells second derivatives.
    first_damping, most_damping, no_damping : float
    """

    steps: int = 250
    enough: float = 1e-14
    floor: float = 1e-26
    close: float = 1e-13
    near: float = 1e-2
    first_damping: float = 1e-3
    most_damping: float = 1e12
    no_damping: float = 1e-7


@dataclass(frozen=True, slots=True)
class Roles:
    """Parameters by role: eliminated in closed form, searched, or held.

    Attributes
    ----------
    in_logarithm : tuple of bool
        Which of the searched ones are searched in their logarithm.
    held_linear : tuple of int
        Linear parameters that are fixed or searched.
    amplitude : tuple of (index, weight)
        The combination of linear parameters the other derivatives are proportional to.
    unit : tuple of float
        Linear parameters for which that combination is one.
    """

    eliminated: tuple[int, ...]
    searched: tuple[int, ...]
    in_logarithm: tuple[bool, ...]
    held_linear: tuple[int, ...]
    amplitude: tuple[tuple[int, float], ...]
    unit: tuple[float, ...]
    is_linear: tuple[bool, ...]

    def plain(self, template: list[float]) -> Iterator[tuple[float, float, bool]]:
        """Unit value, fixed value and linearity of each parameter."""
        return zip(self.unit, template, self.is_linear, strict=True)


@lru_cache(maxsize=256)
def roles_of(model: ResponseModel, free: tuple[bool, ...], unbounded: tuple[bool, ...]) -> Roles:
    """Eliminate the free linear parameters without bounds; search the other free ones."""
    linear = tuple(q.linear for q in model.parameters)
    count = range(len(free))
    eliminated = tuple(i for i in count if linear[i] and free[i] and unbounded[i])
    searched = tuple(i for i in count if free[i] and i not in eliminated)
    unit = [0.0] * len(free)
    for name, weight in model.amplitude.items():
        unit[model.index(name)] = max(weight, 0.0)
    return Roles(
        eliminated,
        searched,
        tuple(model.parameters[i].positive for i in searched),
        tuple(i for i in count if linear[i] and i not in eliminated),
        tuple((model.index(name), weight) for name, weight in model.amplitude.items()),
        tuple(unit),
        linear,
    )
