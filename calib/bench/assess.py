"""Model and range of a method, judged by its history; nothing is written and no run changes its model."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calib import store as tables
from calib.acceptance.limits import Limit
from calib.bench.method_definition import MethodDefinition
from calib.bench.method_history import MethodHistory, history_of_method
from calib.bench.simulated_runs import usual_replicates
from calib.curves.curve import Curve
from calib.curves.history_noise import HistoryNoise
from calib.curves.nested_models import FEWEST_RUNS, NestedComparison, compare_nested, nestings_of
from calib.curves.pooling import pool_noise
from calib.curves.refit import requested_bounds
from calib.curves.stack import fit_stack
from calib.errors import InputError
from calib.quantification.curve_limits import curve_limits
from calib.quantification.range import precision_profile, working_range

Array = NDArray[np.float64]

# The simpler model may cost this share of the allowed error before a larger one is called for.
SHARE_OF_ALLOWED = 1.0 / 3.0
# Range and limits are those of the last runs, which the next one will resemble.
LAST = 10
POINTS = 121


@dataclass(frozen=True, slots=True)
class JudgedComparison:
    """A comparison with what it means for the method.

    Attributes
    ----------
    worst_bias : float
        Of the smaller model within the calibrated range, where the method reports results; infinite where it
        reads no value from some response there. Not the working range: a model that does not fit inflates the
        residuals, and with them shrinks the working range to where it does no harm.
    allowed : float or None
        A third of the error the method allows a standard.
    larger_needed : bool
        The readings tell the models apart and the smaller one costs too much.
    """

    comparison: NestedComparison
    worst_bias: float
    allowed: float | None
    larger_needed: bool


@dataclass(frozen=True, slots=True)
class Assessment:
    """What the history of a method says about its model and its range.

    ``concentration`` and ``profile`` (m,) are the precision profile; limits and ends are medians over the
    last runs, None where most runs have none.
    """

    method: str
    version: int
    instrument: str
    model: str
    concentration_unit: str
    runs: int
    noise: HistoryNoise
    comparisons: tuple[JudgedComparison, ...]
    last: int
    replicates: int
    cv: float
    concentration: Array
    profile: Array
    calibrated: tuple[float, float]
    working: tuple[float | None, float | None]
    critical: float | None
    detectable: float | None
    reporting_limit: float | None


def assess_method(
    store: tables.Store,
    method: str,
    instrument: str | None = None,
    *,
    cv: float | None = None,
    replicates: int | None = None,
) -> Assessment:
    """Judge model and range of a method by its accepted runs; the store is only read.

    Parameters
    ----------
    instrument : str, optional
        Needed where several instruments have runs of the method.
    cv : float, optional
        Coefficient of variation that bounds the working range; that of the method where left out.
    replicates : int, optional
        Readings of an unknown; as in the last accepted run where left out.

    Raises
    ------
    NotFound
        For an unknown method or instrument, and without an accepted run.
    InputError
        With fewer than 6 accepted runs, or for an impossible cv or number of replicates.
    """
    if cv is not None and not 0 < cv <= 1:
        raise InputError(
            f"a coefficient of variation of {cv:g} must lie above 0 and be at most 1, such as 0.2"
        )
    if replicates is not None and replicates < 1:
        raise InputError(f"{replicates} replicates: give at least 1")
    history = history_of_method(store, method, instrument)
    curves = [a.curve for a in history.accepted]
    if len(curves) < FEWEST_RUNS:
        raise InputError(
            f"method {method} has {len(curves)} accepted runs on {history.instrument}; model and range are judged by "
            f"at least {FEWEST_RUNS}"
        )
    noise = pool_noise(curves)
    definition = history.definition
    required = definition.required_cv if cv is None else cv
    m = usual_replicates(history) if replicates is None else replicates
    last = _refitted(curves[-LAST:], noise)
    low, high = _calibrated(history)
    working = _working(last, required, m, low, high)
    limits = [curve_limits(c, m, coefficient_of_variation=required) for c in last]
    x = np.geomspace(low, high, POINTS)
    return Assessment(
        method=definition.name,
        version=history.version,
        instrument=history.instrument,
        model=definition.model,
        concentration_unit=definition.concentration_unit,
        runs=len(curves),
        noise=noise,
        comparisons=tuple(
            _judged(compare_nested(curves, n, noise.function), low, high, definition)
            for n in nestings_of(definition.model)
        ),
        last=len(last),
        replicates=m,
        cv=required,
        concentration=x,
        profile=np.median([precision_profile(c, x, m) for c in last], axis=0),
        calibrated=(low, high),
        working=working,
        critical=_median([limit.critical for limit in limits]),
        detectable=_median([limit.detectable for limit in limits]),
        reporting_limit=definition.results.reporting_limit,
    )


def _refitted(curves: list[Curve], noise: HistoryNoise) -> list[Curve]:
    """The last runs under the noise of the history, as the next run would be fitted."""
    found = []
    for c in curves:
        x, y = c.standards.concentration, c.standards.response[None]
        again = fit_stack(x, y, c.response_model, noise=noise, fixed=c.fixed, bounds=requested_bounds(c))[0]
        if again.converged:
            found.append(again)
    if not found:
        raise InputError("none of the last runs can be fitted under the noise of its history")
    return found


def _calibrated(history: MethodHistory) -> tuple[float, float]:
    verdict = history.latest.verdict
    if verdict.lowest is None or verdict.highest is None or not verdict.lowest < verdict.highest:
        raise InputError(f"run {history.latest.run.id}, the last accepted one, has no calibrated range")
    return verdict.lowest, verdict.highest


def _working(
    curves: list[Curve], cv: float, replicates: int, low: float, high: float
) -> tuple[float | None, float | None]:
    """Ends of the working range, no further than the calibrated range: anchors belong to the fit alone."""
    ranges = [working_range(c, cv, replicates) for c in curves]
    first, last = _median([r.lowest for r in ranges]), _median([r.highest for r in ranges])
    if first is None or last is None or not max(first, low) < min(last, high):
        return None, None
    return max(first, low), min(last, high)


def _median(values: list[float]) -> float | None:
    """Median; None where at least half are undefined."""
    finite = [v for v in values if math.isfinite(v)]
    return float(np.median(finite)) if len(finite) > len(values) / 2 else None


def _judged(
    comparison: NestedComparison, low: float, high: float, definition: MethodDefinition
) -> JudgedComparison:
    worst = comparison.worst_bias(low, high)
    limit: Limit | None = definition.limits.get("relative_error")
    allowed = None if limit is None else SHARE_OF_ALLOWED * limit.value
    # Where nothing says what is allowed, what the readings show decides alone.
    costly = allowed is None or not worst <= allowed
    return JudgedComparison(comparison, worst, allowed, comparison.significant and costly)
