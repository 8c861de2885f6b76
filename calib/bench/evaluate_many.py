"""Many runs under one method: their curves fitted as stacks, each then judged as alone."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from types import MappingProxyType

import numpy as np

from calib.bench.evaluate import fitted_curve, fitted_readings, settle
from calib.bench.method_definition import HISTORY, MethodDefinition
from calib.bench.records import Evaluation, Measured, NoiseHistory
from calib.curves.curve import Curve
from calib.curves.stack import fit_stack


def evaluate_many(
    definition: MethodDefinition,
    runs: Mapping[int, Sequence[Measured]],
    histories: Mapping[int, NoiseHistory] = MappingProxyType({}),
) -> dict[int, Evaluation | None]:
    """Evaluate runs as `evaluate` does one by one, and as fast as a stack.

    Parameters
    ----------
    definition : MethodDefinition
    runs : mapping
        Readings of each run by its number, in the method's units.
    histories : mapping, optional
        What the noise model of a run was pooled over, by its number; see `evaluate`.

    Returns
    -------
    dict
        Evaluation by number; None where no standard reading is left to fit.
    """
    # In the order of the levels, so that runs measured in another order share a stack.
    fitted = {n: sorted(fitted_readings(definition, readings), key=_level) for n, readings in runs.items()}
    present = {n: readings for n, readings in fitted.items() if readings}
    if definition.noise == HISTORY:  # every run has a noise model of its own
        curves = {n: fitted_curve(definition, r, histories.get(n)) for n, r in present.items()}
    else:
        curves = _curves(definition, present)
    return {
        n: settle(definition, r, curves[n], histories.get(n)) if n in curves else None
        for n, r in runs.items()
    }


def _level(reading: Measured) -> float:
    return reading.concentration or 0.0


def _curves(definition: MethodDefinition, fitted: Mapping[int, Sequence[Measured]]) -> dict[int, Curve]:
    """Curves by number: runs that share their levels in one stack, all the others in one more."""
    alike: dict[tuple[float, ...], list[int]] = {}
    for number, readings in fitted.items():
        alike.setdefault(tuple(_level(r) for r in readings), []).append(number)
    groups = [numbers for numbers in alike.values() if len(numbers) > 1]
    rest = [numbers[0] for numbers in alike.values() if len(numbers) == 1]
    curves: dict[int, Curve] = {}
    for numbers in (*groups, rest):
        if numbers:
            curves |= zip(numbers, _stack(definition, [fitted[n] for n in numbers]), strict=True)
    return curves


def _stack(definition: MethodDefinition, runs: Sequence[Sequence[Measured]]) -> Sequence[Curve]:
    """Curves of runs; a shorter one is filled up with absent readings at a level it has."""
    longest = max(len(readings) for readings in runs)
    x, y = np.empty((len(runs), longest)), np.full((len(runs), longest), math.nan)
    for i, readings in enumerate(runs):
        x[i] = _level(readings[0])
        x[i, : len(readings)] = [_level(r) for r in readings]
        y[i, : len(readings)] = [r.response for r in readings]
    return fit_stack(
        x[0] if np.all(x == x[0]) else x,
        y,
        model=definition.model,
        noise=definition.noise,
        fixed=definition.fixed,
        bounds=definition.bounds,
    )
