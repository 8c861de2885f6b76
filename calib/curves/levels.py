"""Replicates collapsed exactly: level means, their counts, and the pure error left behind."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calib.curves.stack_problem import some

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Levels:
    """R runs by level, concentrations rising along the first axis.

    Attributes
    ----------
    x : (n, 1) or (n, R) array
    mean : (n, R) array
        Mean response; nan where every reading of the level is absent.
    count : (n, 1) or (n, R) array
        Readings behind each mean.
    pure : (n, R) array
        Sum of squares of the readings about their mean.
    """

    x: Array
    mean: Array
    count: Array
    pure: Array

    @property
    def runs(self) -> int:
        """Number of runs."""
        return int(self.mean.shape[1])

    @property
    def filled(self) -> Array:
        """Mean responses with 0 where there are none."""
        present = self.count > 0
        return self.mean if present.all() else np.where(present, self.mean, 0.0)

    def take(self, which: NDArray[np.intp]) -> Levels:
        """Some of the runs."""
        return Levels(
            some(self.x, which),
            self.mean.take(which, axis=-1),
            some(self.count, which),
            self.pure.take(which, axis=-1),
        )


def collapsed(x: Array, y: Array) -> Levels:
    """Collapse replicates of runs that share their concentrations.

    Parameters
    ----------
    x : (n,) array
    y : (n, R) array
        nan where a reading is absent.
    """
    levels, place, counts = np.unique(x, return_inverse=True, return_counts=True)
    order = np.argsort(place, kind="stable")
    ordered = y if np.all(order[1:] > order[:-1]) else y[order]
    present = ~np.isnan(ordered)
    if present.all() and np.all(counts == counts[0]):
        # As many replicates at every level: a reshape serves.
        grouped = ordered.reshape(levels.size, counts[0], -1)
        mean = grouped.mean(axis=1)
        pure = np.einsum("lmr,lmr->lr", grouped - mean[:, None], grouped - mean[:, None])
        return Levels(levels[:, None], mean, counts.astype(np.float64)[:, None], pure)
    first = np.searchsorted(place[order], np.arange(levels.size))
    if present.all():
        size = counts.astype(np.float64)[:, None]
        mean = np.add.reduceat(ordered, first, axis=0) / size
        pure = np.add.reduceat((ordered - mean[place[order]]) ** 2, first, axis=0)
        return Levels(levels[:, None], mean, size, pure)
    count = np.add.reduceat(present.astype(np.float64), first, axis=0)
    with np.errstate(invalid="ignore"):
        mean = np.add.reduceat(np.where(present, ordered, 0.0), first, axis=0) / count
        about = np.where(present, ordered - mean[place[order]], 0.0)
    return Levels(levels[:, None], mean, count, np.add.reduceat(about**2, first, axis=0))


def uncollapsed(x: Array, y: Array) -> Levels:
    """Every reading a level of its own, sorted by concentration within each run.

    Parameters
    ----------
    x : (n,) or (n, R) array
    y : (n, R) array
    """
    wide = x[:, None] if x.ndim == 1 else x
    order = np.argsort(wide, axis=0, kind="stable")
    mean = np.take_along_axis(y, np.broadcast_to(order, y.shape), axis=0)
    return Levels(
        np.take_along_axis(wide, order, axis=0),
        mean,
        np.isfinite(mean).astype(np.float64),
        np.zeros(y.shape),
    )
