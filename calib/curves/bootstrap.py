"""Parametric bootstrap of a curve: the same standards read again and again, as one stack."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calib.curves.chance import SEED, seeded
from calib.curves.curve import Curve
from calib.curves.refit import own_start, refit, refuse_unfitted
from calib.curves.standards import frozen
from calib.errors import InputError, ModelError

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Bootstrap:
    """Result of `bootstrap`.

    Attributes
    ----------
    parameter_names : tuple of str
    parameters : (runs, k) array
        Of each simulated run; none is dropped.
    converged : (runs,) bool array
    at_bound : (runs,) bool array
        Runs without a finite minimum, or on a bound that was asked for.
    seed : int
        The same seed gives the same runs.
    """

    parameter_names: tuple[str, ...]
    parameters: Array
    converged: NDArray[np.bool_]
    at_bound: NDArray[np.bool_]
    seed: int

    @property
    def standard_errors(self) -> dict[str, float]:
        """Standard deviation of each parameter over the runs; 0 for a fixed one.

        Where some runs have no finite minimum it is very large: such a parameter is not determined.
        """
        # About the first run, so that a value that never changes deviates by exactly 0.
        deviations = (self.parameters - self.parameters[0]).std(axis=0, ddof=1)
        return {n: float(s) for n, s in zip(self.parameter_names, deviations, strict=True)}


def bootstrap(curve: Curve, runs: int = 2000, seed: int = SEED) -> Bootstrap:
    """Simulate runs from a curve and its noise model, and fit each of them.

    Parametric bootstrap (Efron and Tibshirani, An Introduction to the Bootstrap, 1993, 6.5; from
    memory). Readings scatter normally about the curve with variance scale²·G, and every run is
    fitted with the curve's own noise model from the curve's own parameters. Percentiles of such
    runs make intervals that cover too little with few standards: read unknowns by inversion.

    Parameters
    ----------
    curve : Curve
    runs : int
    seed : int
        Kept with the result.

    Raises
    ------
    InputError
        For fewer than 2 runs or a seed that is none.
    ModelError
        For a curve that was not fitted, or whose scatter is not known.

    Examples
    --------
    >>> import calib
    >>> curve = calib.fit([0, 1, 2, 3, 4], [0.1, 2.0, 3.9, 6.1, 8.0], model="line")
    >>> calib.bootstrap(curve, runs=500, seed=1).parameters.shape
    (500, 2)
    """
    if runs < 2:
        raise InputError(f"runs = {runs} must be at least 2")
    refuse_unfitted(curve)
    if not np.isfinite(curve.scale):
        raise ModelError("as many readings as free parameters: the scatter to simulate is not known")
    x = curve.standards.concentration
    mean = curve.predict(x)
    sd = curve.scale * np.sqrt(curve.noise.at_standards(mean, x))
    simulated = mean + sd * seeded(seed).standard_normal((runs, x.size))
    stack = refit(curve, simulated, own_start(curve))
    return Bootstrap(
        stack.parameter_names, frozen(stack.parameters), stack.converged, stack.at_bound, int(seed)
    )
