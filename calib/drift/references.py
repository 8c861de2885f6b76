"""What a fixed sample would have read: each run's response expressed as a concentration on the baseline.

A run's curve predicts a response at a reference concentration. Read on the mean curve of the
baseline runs, that response is a concentration; its distance from the reference is the drift of the
instrument as its users feel it, whatever the response model and its parameters.
"""

from dataclasses import dataclass
from enum import StrEnum

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.interpolate import PchipInterpolator

from calib.errors import InputError

FloatArray = NDArray[np.float64]


class Axis(StrEnum):
    """The concentration axis between grid points: ln x for models on x >= 0, plain x for lines."""

    LN = "ln"
    PLAIN = "plain"


class OffBaseline(StrEnum):
    """Why a response has no concentration on the baseline; `NONE` where it has one."""

    NONE = ""
    NO_RESPONSE = "no response"
    BELOW = "beyond the low end of the baseline"
    ABOVE = "beyond the high end of the baseline"


@dataclass(frozen=True, slots=True)
class Baseline:
    """The mean response of the baseline runs, tabulated.

    Attributes
    ----------
    concentration : (g,) array
        Strictly rising grid, in the unit of the references.
    response : (g,) array
        Mean response, strictly rising or falling.
    axis : Axis
        The axis of the interpolation.
    """

    concentration: FloatArray
    response: FloatArray
    axis: Axis


@dataclass(frozen=True, slots=True)
class EquivalentConcentrations:
    """What samples of the reference concentrations would have read on the baseline, per run.

    Attributes
    ----------
    reference : (k,) array
        Concentrations of the fixed samples.
    found : (runs, k) array
        What they would have read, same unit; nan where the response leaves the baseline.
    reason : (runs, k) array of str
        `OffBaseline` where found is nan, else empty.
    """

    reference: FloatArray
    found: FloatArray
    reason: NDArray[np.str_]

    @property
    def shift_percent(self) -> FloatArray:
        """(runs, k) array, 100 (found / reference - 1)."""
        return 100.0 * (self.found / self.reference - 1.0)


def tabulate_baseline(concentration: ArrayLike, responses: ArrayLike, axis: Axis = Axis.LN) -> Baseline:
    """Average the responses of the baseline runs on a grid of concentrations.

    Parameters
    ----------
    concentration : (g,) array
        Strictly rising grid of at least two concentrations, above zero for `Axis.LN`. It
        should reach well past the references, so that a shifted response still meets it.
    responses : (runs, g) array
        Response each baseline run's curve predicts on the grid.
    axis : Axis
        The axis of the later interpolation.

    Returns
    -------
    Baseline

    Raises
    ------
    InputError
        The grid does not rise, is not positive on the ln axis, or the mean is not strictly monotone.
    """
    grid = np.asarray(concentration, dtype=np.float64)
    table = np.atleast_2d(np.asarray(responses, dtype=np.float64))
    _check_grid(grid, axis)
    if table.shape[1:] != grid.shape or table.shape[0] == 0:
        raise InputError(
            f"drift baseline: {table.shape} responses for {grid.size} concentrations; give (runs, grid)"
        )
    mean = table.mean(axis=0)
    _check_monotone(grid, mean)
    return Baseline(_read_only(grid), _read_only(mean), axis)


def equivalent_concentrations(
    reference: ArrayLike, responses: ArrayLike, baseline: Baseline
) -> EquivalentConcentrations:
    """Express each run's response at the reference concentrations as a concentration on the baseline.

    The inverse of the baseline is a monotone piecewise cubic (Fritsch and Carlson 1980, SIAM J. Numer.
    Anal. 17: 238-246; from memory) through the tabulated points, in ln x or x, and never extrapolates.

    Parameters
    ----------
    reference : (k,) array
        Reference concentrations, above zero.
    responses : (runs, k) array
        Response each run's curve predicts there; nan where a run has none.
    baseline : Baseline
        From `tabulate_baseline`.

    Returns
    -------
    EquivalentConcentrations

    Raises
    ------
    InputError
        A reference is not above zero, or the shapes do not fit.
    """
    references = np.atleast_1d(np.asarray(reference, dtype=np.float64))
    table = np.atleast_2d(np.asarray(responses, dtype=np.float64))
    if table.shape[1:] != references.shape:
        raise InputError(
            f"drift: {table.shape} responses for {references.size} references; give (runs, references)"
        )
    if not np.all(references > 0):
        raise InputError(f"drift: reference concentrations {references.tolist()} must all be above zero")
    reason = _reason(table, baseline)
    found = np.where(reason == OffBaseline.NONE.value, _inverse(table, baseline), np.nan)
    return EquivalentConcentrations(_read_only(references), _read_only(found), reason)


def ln_recovery(found: ArrayLike, level: ArrayLike) -> FloatArray:
    """Compute ln(found / level) of check standards, nan where either is not above zero.

    Parameters
    ----------
    found, level : (n,) arrays
        Found and nominal concentration, same unit.

    Returns
    -------
    (n,) array
    """
    ratio = np.asarray(found, dtype=np.float64) / _positive(level)
    return np.log(_positive(ratio))


def _positive(values: ArrayLike) -> FloatArray:
    numbers = np.asarray(values, dtype=np.float64)
    return np.where(numbers > 0, numbers, np.nan)


def _inverse(responses: FloatArray, baseline: Baseline) -> FloatArray:
    concentration, response = _rising(baseline)
    axis = np.log(concentration) if baseline.axis is Axis.LN else concentration
    inside = np.clip(responses, response[0], response[-1])
    found: FloatArray = PchipInterpolator(response, axis)(np.where(np.isnan(inside), response[0], inside))
    return np.exp(found) if baseline.axis is Axis.LN else found


def _rising(baseline: Baseline) -> tuple[FloatArray, FloatArray]:
    """Concentrations and responses in the order of rising response."""
    order = np.argsort(baseline.response)
    return baseline.concentration[order], baseline.response[order]


def _reason(responses: FloatArray, baseline: Baseline) -> NDArray[np.str_]:
    low_end, high_end = baseline.response[0], baseline.response[-1]
    direction = np.sign(high_end - low_end)
    cases = [
        np.isnan(responses),
        direction * (responses - low_end) < 0,
        direction * (responses - high_end) > 0,
    ]
    words = [OffBaseline.NO_RESPONSE.value, OffBaseline.BELOW.value, OffBaseline.ABOVE.value]
    return np.select(cases, words, default=OffBaseline.NONE.value).astype(np.str_)


def _check_grid(grid: FloatArray, axis: Axis) -> None:
    if grid.ndim != 1 or grid.size < 2 or not np.all(np.diff(grid) > 0):
        raise InputError("drift baseline: the concentrations must be two or more in strictly rising order")
    if axis is Axis.LN and grid[0] <= 0:
        raise InputError(
            f"drift baseline: concentration {grid[0]:g} has no logarithm; start above 0 or use the plain axis"
        )


def _check_monotone(grid: FloatArray, mean: FloatArray) -> None:
    steps = np.diff(mean) * np.sign(mean[-1] - mean[0])
    if not np.all(steps > 0):
        at = float(grid[int(np.argmin(steps > 0))])
        raise InputError(
            f"drift baseline: the mean response does not rise or fall steadily after concentration {at:g};"
            " shorten the grid, or leave out runs without a curve"
        )


def _read_only(values: FloatArray) -> FloatArray:
    frozen = values.copy()
    frozen.setflags(write=False)
    return frozen
