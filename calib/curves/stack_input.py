"""What `fit_stack` is handed: checked, and turned so that the runs come last."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from calib.curves.standards import extreme, refuse_extreme
from calib.errors import InputError
from calib.models import ResponseModel

Array = NDArray[np.float64]

OK = "ok"
TOO_FEW_LEVELS = "too-few-levels"
NOT_FINITE = "not-finite"


def arrays(concentration: ArrayLike, response: ArrayLike, model: ResponseModel) -> tuple[Array, Array]:
    """Concentrations (n,) or (n, runs) and responses (n, runs), runs last."""
    x, y = np.asarray(concentration, dtype=np.float64), np.asarray(response, dtype=np.float64)
    if y.ndim != 2 or y.size == 0:
        raise InputError(f"response must be (runs, readings), got shape {y.shape}")
    if x.shape not in ((y.shape[1],), y.shape):
        raise InputError(
            f"concentration has shape {x.shape} for responses of shape {y.shape}; give (n,) or (runs, n)"
        )
    if not np.all(np.isfinite(x)):
        raise InputError("a concentration is not finite; mark an absent reading by a response of nan")
    refuse_extreme(x, "concentration")
    if model.logarithmic and np.any(x < 0):
        raise InputError(f"a concentration is negative; model '{model.name}' lives on x >= 0")
    return (np.ascontiguousarray(x.T) if x.ndim == 2 else x), np.ascontiguousarray(y.T)


def per_run(name: str, values: ArrayLike, runs: int) -> Array:
    """Start values of one parameter (runs,)."""
    array = np.asarray(values, dtype=np.float64)
    if array.shape not in ((), (runs,)):
        raise InputError(
            f"start of {name} has shape {array.shape}; give one number or one for each of {runs} runs"
        )
    return np.broadcast_to(array, (runs,)).copy()


def statuses(x: Array, y: Array, needed: int) -> tuple[str, ...]:
    """Whether each run can be fitted; ``needed`` is the number of free parameters."""
    present = ~np.isnan(y)
    levels: Array | int
    if x.ndim > 1:
        levels = np.array([np.unique(x[present[:, i], i]).size for i in range(y.shape[1])])
    elif present.all():
        levels = np.unique(x).size
    else:
        _, place = np.unique(x, return_inverse=True)
        seen = np.zeros((place.max() + 1, y.shape[1]), dtype=bool)
        np.logical_or.at(seen, place, present)
        levels = seen.sum(axis=0)
    infinite = extreme(y).any(axis=0)
    few = np.broadcast_to(levels < needed, infinite.shape)
    if not (infinite.any() or few.any()):
        return (OK,) * infinite.size
    return tuple(np.select([infinite, few], [NOT_FINITE, TOO_FEW_LEVELS], OK).tolist())
