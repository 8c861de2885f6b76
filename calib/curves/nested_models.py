"""Whether the runs of a method call for a larger response model: tests pooled over its history.

One run cannot tell (a 4PL fitted to 16 readings of a curve of asymmetry 0.7 is found wanting in 20 % of
runs), ten together mostly can. The model belongs to the method: nothing here chooses one for a run.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import fdtrc

from calib.curves.curve import Curve
from calib.curves.levels import collapsed
from calib.curves.noise import NoiseModel
from calib.curves.stack import CurveStack, fit_stack
from calib.errors import InputError
from calib.models import response_model

Array = NDArray[np.float64]

FEWEST_RUNS = 6
# Both are needed before a larger model is called for (alpha of the nested test, difference of AICc).
ALPHA, AICC_DIFFERENCE = 0.01, 4.0


@dataclass(frozen=True, slots=True)
class Nesting:
    """A larger model that contains a smaller one; ``names`` maps parameters that keep their meaning."""

    smaller: str
    larger: str
    names: Mapping[str, str]


NESTINGS = (
    Nesting("proportional", "line", {"slope": "slope"}),
    Nesting("line", "quadratic", {"intercept": "intercept"}),
    Nesting("saturation", "4PL", {"offset": "zero"}),
    Nesting("squared-saturation", "4PL", {"offset": "zero"}),
    Nesting("quenching", "4PL", {"offset": "infinite"}),
    Nesting("4PL", "5PL", {"zero": "zero", "infinite": "infinite"}),
)


def nestings_of(model: str) -> tuple[Nesting, ...]:
    """The pairs a model stands in: first as the smaller one, then as the larger one."""
    return (
        *(n for n in NESTINGS if n.smaller == model),
        *(n for n in NESTINGS if n.larger == model),
    )


@dataclass(frozen=True, slots=True)
class FTest:
    """An F ratio with its degrees of freedom and the probability of a larger one by chance."""

    ratio: float
    numerator: int
    denominator: int

    @property
    def p(self) -> float:
        """Probability of a ratio at least as large where the smaller model is true."""
        return float(fdtrc(self.numerator, self.denominator, self.ratio))


@dataclass(frozen=True, slots=True)
class NestedComparison:
    """Two nested models over the same runs, with the same weights.

    Attributes
    ----------
    runs, readings : int
    nested : FTest
        Sum of squares gained by the larger model, pooled over the runs.
    lack_of_fit : FTest or None
        Of the smaller model against the replicates; None without replicates.
    aicc_difference : float
        AICc of the smaller model minus that of the larger, over all runs with one residual variance.
    concentration, bias : (m,) arrays
        Relative error of a concentration read with the smaller model where the larger is true, median over
        the runs; nan where the smaller one reads none.
    """

    smaller: str
    larger: str
    runs: int
    readings: int
    nested: FTest
    lack_of_fit: FTest | None
    aicc_difference: float
    concentration: Array
    bias: Array

    @property
    def significant(self) -> bool:
        """Whether the readings tell the two models apart: by the pooled test and by AICc."""
        return self.nested.p < ALPHA and self.aicc_difference > AICC_DIFFERENCE

    def worst_bias(self, lowest: float, highest: float) -> float:
        """Largest size of the bias within a range; infinite where the smaller model reads no value there."""
        within = (self.concentration >= lowest) & (self.concentration <= highest)
        if not within.any():
            return np.nan
        size = np.abs(self.bias[within])
        return float(np.max(np.where(np.isnan(size), np.inf, size)))


def compare_nested(
    curves: Sequence[Curve], nesting: Nesting, noise: NoiseModel, points: int = 101
) -> NestedComparison:
    """Compare two nested models over the standards of many runs.

    The weights are the same for both models and all runs: 1/G at the mean fitted response of the
    larger one. Runs that either model cannot be fitted to are left out.

    Parameters
    ----------
    curves : sequence of Curve
        Accepted runs of one method, fitted with either of the two models.
    nesting : Nesting
    noise : NoiseModel
        Variance function pooled over the runs.
    points : int
        Concentrations over the range of the standards at which the bias is found.

    Raises
    ------
    InputError
        With fewer than 6 runs that both models fit.
    """
    x, y = _aligned(curves)
    fixed = curves[-1].fixed
    small_fixed, large_fixed = _fixed(curves[-1].model, fixed, nesting)
    first = fit_stack(x, y, nesting.larger, noise=noise, fixed=large_fixed)
    model = response_model(nesting.larger)
    means = [model.response(x, p) for p, ok in zip(first.parameters, first.converged, strict=True) if ok]
    if len(means) < FEWEST_RUNS:
        raise InputError(_too_few(len(means), nesting))
    mean = np.mean(means, axis=0)
    sd = np.sqrt(noise.bound_to(mean).variance(mean, x))
    large = fit_stack(x, y, nesting.larger, relative_sd=sd, fixed=large_fixed)
    small = fit_stack(x, y, nesting.smaller, relative_sd=sd, fixed=small_fixed)
    kept = np.flatnonzero(large.converged & small.converged & (large.degrees_of_freedom > 0))
    if kept.size < FEWEST_RUNS:
        raise InputError(_too_few(kept.size, nesting))
    # A fit of the larger model that stopped short of the smaller one's sum has found nothing better.
    ss_large = np.minimum(large.residual_sum[kept], small.residual_sum[kept])
    ss_small = small.residual_sum[kept]
    grid = _grid(x, model.logarithmic, points)
    return NestedComparison(
        smaller=nesting.smaller,
        larger=nesting.larger,
        runs=int(kept.size),
        readings=int(np.isfinite(y[kept]).sum()),
        nested=_f_test(
            float(np.sum(ss_small - ss_large)),
            int(np.sum(small.degrees_of_freedom[kept] - large.degrees_of_freedom[kept])),
            float(np.sum(ss_large)),
            int(np.sum(large.degrees_of_freedom[kept])),
        ),
        lack_of_fit=_lack_of_fit(x, y[kept], sd, ss_small, small.degrees_of_freedom[kept]),
        aicc_difference=_aicc(ss_small, small.degrees_of_freedom[kept], y[kept])
        - _aicc(ss_large, large.degrees_of_freedom[kept], y[kept]),
        concentration=grid,
        bias=_bias(x, sd, large, kept, nesting, small_fixed, grid),
    )


def _too_few(runs: int, nesting: Nesting) -> str:
    return (
        f"{runs} runs could be fitted with {nesting.smaller} and {nesting.larger}; a model is judged by at least "
        f"{FEWEST_RUNS}"
    )


def _fixed(
    model: str, fixed: Mapping[str, float], nesting: Nesting
) -> tuple[dict[str, float], dict[str, float]]:
    """What the method holds fixed, for the smaller and for the larger model."""
    if model == nesting.smaller:
        return dict(fixed), {nesting.names[n]: v for n, v in fixed.items() if n in nesting.names}
    back = {large: small for small, large in nesting.names.items()}
    return {back[n]: v for n, v in fixed.items() if n in back}, dict(fixed)


def _aligned(curves: Sequence[Curve]) -> tuple[Array, Array]:
    """Concentrations (n,) that hold the levels and replicates of every run, and responses (runs, n)."""
    counts: dict[float, int] = {}
    for curve in curves:
        for level, n in zip(*np.unique(curve.standards.concentration, return_counts=True), strict=True):
            counts[float(level)] = max(counts.get(float(level), 0), int(n))
    levels = sorted(counts)
    first = dict(zip(levels, np.cumsum([0, *(counts[v] for v in levels)])[:-1].tolist(), strict=True))
    x = np.repeat(levels, [counts[v] for v in levels])
    y = np.full((len(curves), x.size), np.nan)
    for i, curve in enumerate(curves):
        place = dict(first)
        for level, response in zip(curve.standards.concentration, curve.standards.response, strict=True):
            y[i, place[float(level)]] = response
            place[float(level)] += 1
    return x, y


def _f_test(gained: float, numerator: int, left: float, denominator: int) -> FTest:
    return FTest((gained / numerator) / (left / denominator), numerator, denominator)


def _lack_of_fit(x: Array, y: Array, sd: Array, total: Array, freedom: NDArray[np.intp]) -> FTest | None:
    levels = collapsed(x, y.T)
    weight = 1.0 / collapsed(x, sd[:, None]).mean ** 2
    pure = float(np.sum(weight * levels.pure))
    count = np.broadcast_to(levels.count, levels.mean.shape)
    own = int(np.sum(np.maximum(count - 1, 0)))
    left = int(freedom.sum()) - own
    if own == 0 or left <= 0 or pure <= 0:
        return None
    return _f_test(float(total.sum()) - pure, left, pure, own)


def _aicc(total: Array, freedom: NDArray[np.intp], y: Array) -> float:
    """AICc of runs with parameters of their own and one residual variance."""
    n = int(np.isfinite(y).sum())
    k = n - int(freedom.sum()) + 1
    return float(n * np.log(total.sum() / n) + 2 * k + 2 * k * (k + 1) / (n - k - 1))


def _grid(x: Array, logarithmic: bool, points: int) -> Array:
    low, high = float(x[x > 0].min()), float(x.max())
    return np.geomspace(low, high, points) if logarithmic else np.linspace(low, high, points)


def _bias(
    x: Array,
    sd: Array,
    large: CurveStack,
    kept: NDArray[np.intp],
    nesting: Nesting,
    fixed: Mapping[str, float],
    grid: Array,
) -> Array:
    """Median over the runs of what the smaller model reads from the larger one's curve, minus 1."""
    larger, smaller = response_model(nesting.larger), response_model(nesting.smaller)
    truth = large.parameters[kept]
    clean = np.array([larger.response(x, p) for p in truth])
    fitted = fit_stack(x, clean, nesting.smaller, relative_sd=sd, fixed=fixed)
    with np.errstate(all="ignore"):
        read = [
            smaller.inverse(larger.response(grid, p), q)
            for p, q in zip(truth, fitted.parameters, strict=True)
        ]
    ratio = np.array(read) / grid - 1.0
    # Where most runs read nothing, the median is none either.
    missing = np.isnan(ratio).mean(axis=0) > 0.5
    median = np.median(np.where(np.isnan(ratio), np.inf, ratio), axis=0)
    return np.where(missing | ~np.isfinite(median), np.nan, median)
