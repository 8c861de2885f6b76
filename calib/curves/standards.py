"""The standards of one run as the fit sees them: checked once, then frozen."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from calib.errors import InputError
from calib.models import CustomModel, ResponseModel

Array = NDArray[np.float64]

# No instrument works near these; beyond them squares overflow or vanish.
SMALLEST, LARGEST = 1e-120, 1e120


@dataclass(frozen=True, slots=True)
class Standards:
    """Concentrations and responses that take part in a fit.

    Attributes
    ----------
    concentration : (n,) array, or (n, q) for a custom model of several columns
    response : (n,) array
    """

    concentration: Array
    response: Array

    @property
    def levels(self) -> int:
        """Number of distinct concentrations."""
        return int(np.unique(self.concentration, axis=0).shape[0])

    @property
    def lowest(self) -> float:
        """Lowest concentration above zero (lowest of all where some are negative)."""
        x = self.concentration
        if x.ndim > 1 or x.size == 0:
            return np.nan
        above = x[x > 0] if x.min() >= 0 else x
        return float(above.min()) if above.size else np.nan

    @property
    def highest(self) -> float:
        """Highest concentration."""
        x = self.concentration
        return float(x.max()) if x.ndim == 1 and x.size else np.nan


def checked_standards(concentration: ArrayLike, response: ArrayLike, model: ResponseModel) -> Standards:
    """Turn what a caller hands in into `Standards`.

    Raises
    ------
    InputError
        Naming the index and value that cannot be used, and what to do.
    """
    x, y = _numbers(concentration, "concentration"), _numbers(response, "response")
    if y.ndim != 1:
        raise InputError(f"response must be one-dimensional, got shape {y.shape}; flatten it")
    if x.ndim not in (1, 2) or x.shape[0] != y.size:
        raise InputError(
            f"{x.shape[0] if x.ndim else 1} concentrations for {y.size} responses; give one each"
        )
    if y.size == 0:
        raise InputError("no standards: give at least as many levels as the model has parameters")
    if x.ndim == 2 and not isinstance(model, CustomModel):
        raise InputError(f"model '{model.name}' takes one concentration a reading, got shape {x.shape}")
    _refuse_not_finite(x, "concentration")
    _refuse_not_finite(y, "response")
    refuse_extreme(x, "concentration")
    refuse_extreme(y, "response")
    if model.logarithmic and np.any(x < 0):
        i = int(np.flatnonzero(x < 0)[0])
        raise InputError(f"concentration[{i}] = {x[i]:g} is negative; model '{model.name}' lives on x >= 0")
    return Standards(frozen(x), frozen(y))


def _numbers(values: ArrayLike, what: str) -> Array:
    try:
        return np.array(values, dtype=np.float64)
    except (TypeError, ValueError) as cause:
        raise InputError(f"{what} holds something that is no number ({cause}); give numbers only") from cause


def extreme(values: Array) -> NDArray[np.bool_]:
    """Which numbers, infinite ones included, have squares beyond floating point; absent ones do not."""
    size = np.abs(values)
    return np.asarray(((size > 0) & (size < SMALLEST)) | (size > LARGEST))


def refuse_extreme(values: Array, what: str) -> None:
    """Refuse sizes whose squares leave the range of floating-point numbers."""
    bad = np.argwhere(extreme(values))
    if bad.size:
        where = ", ".join(str(int(i)) for i in bad[0])
        raise InputError(
            f"{what}[{where}] = {values[tuple(bad[0])]:g} is beyond what can be computed "
            f"({SMALLEST:g} to {LARGEST:g}); use another unit"
        )


def _refuse_not_finite(values: Array, what: str) -> None:
    bad = np.argwhere(~np.isfinite(values))
    if bad.size:
        where = ", ".join(str(int(i)) for i in bad[0])
        raise InputError(f"{what}[{where}] is {values[tuple(bad[0])]}; leave that reading out or correct it")


def frozen(values: Array) -> Array:
    """Read-only copy."""
    copy = np.array(values, dtype=np.float64)
    copy.setflags(write=False)
    return copy
