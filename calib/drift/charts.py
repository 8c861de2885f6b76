"""Control limits that contain the uncertainty of the baseline they are estimated from."""

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import stdtrit

from calib.errors import InputError

FEWEST_RUNS = 10
"""Below this many baseline values there are no limits."""

FINAL_RUNS = 20
"""From this many baseline values on, limits are no longer provisional."""


@dataclass(frozen=True, slots=True)
class ControlLimits:
    """Limits of one chart, in the unit of its values.

    Attributes
    ----------
    centre, sd : float
        Mean and standard deviation of the baseline.
    lower, upper : float
        Control limits.
    count : int
        Number of baseline values.
    provisional : bool
        Fewer than `FINAL_RUNS` baseline values.
    """

    centre: float
    sd: float
    lower: float
    upper: float
    count: int
    provisional: bool


def shewhart_limits(baseline: ArrayLike, charts: int = 3, alpha: float = 0.0027) -> ControlLimits | None:
    """Shewhart limits for a further single value, from a baseline of stable runs.

    The half width is t(1 - alpha / (2 charts), N - 1) * s * sqrt(1 + 1/N): the prediction
    interval of one more value of a normal population, alpha shared by the charts read together.

    Parameters
    ----------
    baseline : (N,) array
        Values of the baseline runs; nan marks a run without a value and is left out.
    charts : int
        Number of charts read together.
    alpha : float
        Probability, per run, that any of them signals without cause.

    Returns
    -------
    ControlLimits or None
        None with fewer than `FEWEST_RUNS` values.

    Raises
    ------
    InputError
        No chart, or alpha not between 0 and 1.

    Examples
    --------
    >>> limits = shewhart_limits([9.0, 11.0] * 10)
    >>> limits.centre, round(limits.upper, 3), limits.provisional
    (10.0, 14.131, False)
    """
    if charts < 1 or not 0 < alpha < 1:
        raise InputError(
            f"control limits: {charts} charts at alpha {alpha:g}; give 1 or more, and 0 < alpha < 1"
        )
    values = np.asarray(baseline, dtype=np.float64)
    values = values[np.isfinite(values)]
    count = values.size
    if count < FEWEST_RUNS:
        return None
    centre, sd = float(values.mean()), float(values.std(ddof=1))
    half = float(stdtrit(count - 1, 1 - alpha / (2 * charts))) * sd * math.sqrt(1 + 1 / count)
    return ControlLimits(centre, sd, centre - half, centre + half, count, count < FINAL_RUNS)


def beyond(values: ArrayLike, limits: ControlLimits) -> NDArray[np.bool_]:
    """Which values lie outside the limits; a value on a limit and nan do not.

    Parameters
    ----------
    values : (n,) array
        In the unit of the limits.
    limits : ControlLimits
        From `shewhart_limits`.

    Returns
    -------
    (n,) array of bool
    """
    points = np.asarray(values, dtype=np.float64)
    outside: NDArray[np.bool_] = (points < limits.lower) | (points > limits.upper)
    return outside
