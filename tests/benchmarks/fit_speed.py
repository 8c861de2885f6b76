"""fit_stack against a loop of scipy's curve_fit on the same data, one thread.

Run: python tests/benchmarks/fit_speed.py
"""

import os

for variable in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ[variable] = "1"

import sys
import warnings
from pathlib import Path

import numpy as np
from scipy.optimize import OptimizeWarning, curve_fit

sys.path[:0] = [str(Path(__file__).parent), str(Path(__file__).parents[2])]
from interleaved import measure, ratios

import calib
from calib.models import response_model
from tests.models.plain_formulas import PLAIN

ROUNDS = 9
LEVELS = np.repeat(3.0 ** np.arange(-5, 3) * 100, 3)
CASES = {
    "4PL": (0.05, 2.5, 100.0, 1.2),
    "5PL": (0.05, 2.5, 100.0, 1.2, 0.8),
    "saturation": (0.05, 2.5, 100.0),
    "squared-saturation": (0.05, 2.5, 100.0),
}
# A loop over more runs than this only repeats itself: the time a run is what counts.
LOOPED = 100


def simulated(name: str, runs: int) -> np.ndarray:
    """Runs (runs, 24) whose parameters scatter by 5 % and whose noise is 3 % of the span."""
    model, rng = response_model(name), np.random.default_rng(2026)
    p = np.array(CASES[name])[:, None, None] * np.exp(0.05 * rng.standard_normal((len(CASES[name]), runs, 1)))
    mean = model.response(LEVELS, list(p))
    return mean + 0.03 * np.ptp(mean, axis=1, keepdims=True) * rng.standard_normal(mean.shape)


def loop(name: str, y: np.ndarray) -> None:
    """curve_fit with covariance, run by run, from the true parameters, on the formula as one writes it."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", (OptimizeWarning, RuntimeWarning))
        for row in y:
            try:
                curve_fit(PLAIN[name], LEVELS, row, p0=CASES[name])
            except RuntimeError:
                continue


def case(name: str, runs: int) -> tuple[float, float]:
    """Median ratios of time a run: given starts, default starts."""
    y = simulated(name, runs)
    looped = min(runs, LOOPED)
    start = dict(zip(response_model(name).names, CASES[name], strict=True))

    def given() -> None:
        calib.fit_stack(LEVELS, y, name, start=start)

    def default() -> None:
        calib.fit_stack(LEVELS, y, name)

    seconds = measure({"loop": lambda: loop(name, y[:looped]), "given": given, "default": default}, ROUNDS)
    scale = runs / looped
    return scale * ratios(seconds, "loop", "given")[0], scale * ratios(seconds, "loop", "default")[0]


def main() -> None:
    """Print the table."""
    print(f"{'model':20}{'runs':>8}{'given starts':>14}{'own starts':>12}   times curve_fit")
    for name in CASES:
        for runs in (1, 100, 10_000):
            given, default = case(name, runs)
            print(f"{name:20}{runs:8}{given:14.2f}{default:12.2f}", flush=True)


if __name__ == "__main__":
    main()
