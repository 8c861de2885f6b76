"""A stack of runs to be solved, and where each of them ended.

Arrays have the readings of a run along the first axis and the runs along the last,
contiguous one.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from calib.models import ResponseModel

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]


@dataclass(frozen=True, slots=True)
class Stack:
    """R runs of n readings (or of n levels with replicates collapsed).

    Attributes
    ----------
    x : (n, 1) or (n, R) array
    y : (n, R) array
        0 where a reading is absent.
    root_weight : (n, 1) or (n, R) array
        Square roots of the weights; 0 where a reading is absent.
    pure : (R,) array
        Weighted pure-error sum that collapsing left behind.
    template : (k,) array
        Values of fixed parameters.
    free : (k,) bool array
    lower, upper : (k, 1) or (k, R) arrays
    """

    model: ResponseModel
    x: Array
    y: Array
    root_weight: Array
    pure: Array
    template: Array
    free: Mask
    lower: Array
    upper: Array

    @property
    def runs(self) -> int:
        """Number of runs."""
        return int(self.y.shape[-1])

    @property
    def size(self) -> Array:
        """Weighted squares of the responses (R,)."""
        weighted = self.root_weight * self.y
        squares: Array = np.einsum("nr,nr->r", weighted, weighted)
        return squares

    def take(self, which: NDArray[np.intp]) -> Stack:
        """Some of the runs."""
        return replace(
            self,
            x=some(self.x, which),
            y=self.y.take(which, axis=-1),
            root_weight=some(self.root_weight, which),
            pure=self.pure[which],
            lower=some(self.lower, which),
            upper=some(self.upper, which),
        )


@dataclass(frozen=True, slots=True)
class StackSolution:
    """Where each run of a stack ended.

    Attributes
    ----------
    parameters : (k, R) array
    total : (R,) array
        Weighted sum of squares without the pure error.
    tangent : (R,) array
        Norm of the residual's part in the tangent plane; 0 at an exact minimum.
    steps : (R,) int array
    """

    parameters: Array
    total: Array
    tangent: Array
    steps: NDArray[np.intp]


def unsolved(starts: Array) -> StackSolution:
    """Every run at its start, with an infinite sum."""
    runs = starts.shape[1]
    return StackSolution(
        np.array(starts, dtype=np.float64),
        np.full(runs, np.inf),
        np.full(runs, np.inf),
        np.zeros(runs, dtype=np.intp),
    )


def some(values: Array, which: NDArray[np.intp]) -> Array:
    """Columns of some runs, contiguous again; a column that all runs share stays as it is."""
    return values if values.shape[-1] == 1 else values.take(which, axis=-1)
