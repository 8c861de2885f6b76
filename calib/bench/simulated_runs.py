"""Runs of a method as its history says they are, with unknowns of known concentration."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from calib.bench.keeping import is_saturated
from calib.bench.method_history import MethodHistory
from calib.bench.planted_faults import Fault, levels_of
from calib.bench.records import Measured
from calib.curves.curve import Curve
from calib.curves.history_noise import ENOUGH_RUNS, HistoryNoise
from calib.curves.noise import NoiseModel
from calib.curves.pooling import pool_noise
from calib.curves.stack import fit_stack
from calib.errors import InputError
from calib.models import ResponseModel

Array = NDArray[np.float64]

# True curves are those of the last accepted runs, in turn: a method is more than one day.
CURVES = 10


@dataclass(frozen=True, slots=True)
class Truth:
    """What is taken as true of a method.

    Attributes
    ----------
    model : ResponseModel
    parameters : (curves, k) array
        Of the last accepted runs.
    noise : NoiseModel
        Variance of a reading is sd² · G.
    sd : float
    pooled : int
        Accepted runs the noise was pooled over; 0 where it is what the method assumes.
    ceiling : float or None
        Highest response of the detector.
    """

    model: ResponseModel
    parameters: Array
    noise: NoiseModel
    sd: float
    pooled: int
    ceiling: float | None


def truth_of(history: MethodHistory) -> Truth:
    """Take curves and noise of a method from its accepted runs.

    Raises
    ------
    InputError
        When no accepted run has scatter to learn from.
    """
    curves = [a.curve for a in history.accepted]
    last = curves[-CURVES:]
    noise, sd, pooled = _noise(curves)
    return Truth(
        last[-1].response_model,
        np.array([c.values for c in last]),
        noise,
        sd,
        pooled,
        history.latest.run.response_ceiling,
    )


def _noise(curves: Sequence[Curve]) -> tuple[NoiseModel, float, int]:
    """Pooled over the history where it is long enough, else as assumed, with the SD of the runs."""
    latest = curves[-1].standards.response
    if len(curves) >= ENOUGH_RUNS:
        pooled = pool_noise(curves)
        if pooled.runs >= ENOUGH_RUNS:
            return pooled.function.bound_to(latest), pooled.spread.sd, pooled.runs
    nu = np.array([c.degrees_of_freedom for c in curves], dtype=np.float64)
    if not nu.sum() > 0:
        raise InputError(
            "the accepted runs have no residual degrees of freedom, so nothing is known of their scatter; "
            "measure more standards than the model has parameters"
        )
    total = sum(c.residual_sum for c in curves if c.degrees_of_freedom > 0)
    return curves[-1].noise.bound_to(latest), float(np.sqrt(total / nu.sum())), 0


@dataclass(frozen=True, slots=True)
class Asked:
    """Unknowns of known concentration read in every simulated run, each so many times."""

    concentration: float
    replicates: int


@dataclass(frozen=True, slots=True)
class RunPlan:
    """Readings of a simulated run in their order, without responses.

    Attributes
    ----------
    readings : tuple of Measured
    contents : (n,) array
        What each cup holds when nothing goes wrong.
    asked : tuple of Asked
    """

    readings: tuple[Measured, ...]
    contents: Array
    asked: tuple[Asked, ...]


def plan_of(history: MethodHistory, asked: Sequence[Asked]) -> RunPlan:
    """Plan a run like the last accepted one, its samples replaced by known ones.

    The known ones stand where its samples stood and bear their names, so that criteria which count
    samples see as many as in the laboratory; the nominal value of each is its number in ``asked``.
    """
    own = history.latest.readings
    first = next((i for i, r in enumerate(own) if r.role == "unknown"), len(own))
    before = [r for r in own[:first] if r.role != "unknown"]
    after = [r for r in own[first:] if r.role != "unknown"]
    names = list(dict.fromkeys(r.sample for r in own if r.role == "unknown")) or ["unknown"]
    known = list(_known(names, asked))
    planned = [*before, *(reading for reading, _ in known), *after]
    held = [
        *((r.concentration or 0.0) / r.dilution for r in before),
        *(holds for _, holds in known),
        *((r.concentration or 0.0) / r.dilution for r in after),
    ]
    readings = tuple(
        replace(r, key=key, response=None, absent_cause=None, excluded=None, saturated=False)
        for key, r in enumerate(planned, start=1)
    )
    return RunPlan(readings, np.array(held), tuple(asked))


def _known(names: Sequence[str], asked: Sequence[Asked]) -> Iterator[tuple[Measured, float]]:
    """Readings of the known samples with what they hold; a name left over is read once."""
    for number, one in enumerate(asked):
        for _ in range(one.replicates):
            yield _unknown(names[number % len(names)], float(number)), one.concentration
    for name in names[len(asked) :]:
        yield _unknown(name, float(len(asked))), asked[0].concentration


def _unknown(name: str, number: float) -> Measured:
    return Measured(0, name, "unknown", number, None, None, 1.0, None, None, False)


def usual_replicates(history: MethodHistory) -> int:
    """How often a sample is read in the last accepted run; once where it had none."""
    groups = Counter((r.sample, r.dilution) for r in history.latest.readings if r.role == "unknown")
    return Counter(groups.values()).most_common(1)[0][0] if groups else 1


def simulated_runs(
    truth: Truth, plan: RunPlan, fault: Fault, runs: int, rng: np.random.Generator
) -> dict[int, list[Measured]]:
    """Readings of so many runs of a plan in which one fault happens."""
    curves = rng.integers(len(truth.parameters), size=runs)
    p = tuple(truth.parameters[curves].T)
    contents = np.repeat(plan.contents[:, None], runs, axis=1)
    response = scattered(truth, fault.contents(plan.readings, contents, rng), p, fault.scatter, rng)
    if fault.saturates:
        response = _saturated(truth, levels_of(plan.readings), p, response)
    return {
        run: [
            replace(r, response=float(y), saturated=is_saturated(float(y), None, truth.ceiling))
            for r, y in zip(plan.readings, response[:, run], strict=True)
        ]
        for run in range(runs)
    }


def scattered(
    truth: Truth, contents: Array, p: tuple[Array, ...], scatter: float, rng: np.random.Generator
) -> Array:
    """Responses (n, runs) of cups on the curves ``p``, each with its own chance."""
    mean = truth.model.response(contents, p)
    sd = scatter * truth.sd * np.sqrt(truth.noise.variance(mean, contents))
    return np.asarray(mean + sd * rng.standard_normal(mean.shape))


def _saturated(truth: Truth, levels: Array, p: tuple[Array, ...], response: Array) -> Array:
    top, below = (truth.model.response(level, p) for level in (levels[-1], levels[-2]))
    limit = 0.5 * (top + below)
    return np.where(top >= below, np.minimum(response, limit), np.maximum(response, limit))


def simulated_history(
    truth: Truth, plan: RunPlan, fixed_and_bounds: dict[str, Any], rng: np.random.Generator
) -> HistoryNoise:
    """Noise model of a laboratory that has as long a history as this one, all of it clean."""
    x = plan.contents[[r.role in ("standard", "anchor") for r in plan.readings]]
    curves = rng.integers(len(truth.parameters), size=truth.pooled)
    contents = np.repeat(x[:, None], truth.pooled, axis=1)
    y = scattered(truth, contents, tuple(truth.parameters[curves].T), 1.0, rng)
    return pool_noise(fit_stack(x, y.T, truth.model, noise=truth.noise, **fixed_and_bounds))
