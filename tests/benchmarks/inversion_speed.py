"""Curve.invert for many unknowns against scalar loops over the same curve, one thread.

A million unknowns by the delta method against three loops that take one unknown at a time and
give value and limits only; a thousand inversion intervals against scipy's brentq on the same band.
Run: python tests/benchmarks/inversion_speed.py
"""

import os

for variable in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ[variable] = "1"

import math
import statistics
import sys
from functools import partial
from pathlib import Path

import numpy as np
from scipy.special import stdtrit

sys.path.insert(0, str(Path(__file__).parent))
sys.path.insert(0, str(Path(__file__).parents[1]))
from interleaved import measure, ratios
from scalar_inversion import band_interval

import calib

ROUNDS = 9
TRUTH = (0.05, 2.5, 100.0, 1.2)
LEVELS = np.repeat(3.0 ** np.arange(-5, 3) * 100, 3)


def curve() -> calib.Curve:
    """A 4PL with 8 levels in triplicate and noise of 3 % of the span."""
    zero, infinite, midpoint, slope = TRUTH
    mean = infinite + (zero - infinite) / (1 + (LEVELS / midpoint) ** slope)
    return calib.fit(LEVELS, mean + 0.03 * np.random.default_rng(2026).standard_normal(LEVELS.size))


def responses(count: int) -> np.ndarray:
    """Responses spread over the middle nine tenths of the span."""
    zero, infinite = TRUTH[:2]
    share = np.random.default_rng(7).uniform(0.05, 0.95, count)
    return zero + (infinite - zero) * share


def closed_form(fitted: calib.Curve, y: list[float]) -> list[tuple[float, float, float]]:
    """Value and limits of each unknown by the delta method, in plain floats."""
    a, d, c, b = fitted.values.tolist()
    v = fitted.covariance.tolist()
    reading = fitted.scale**2
    q = float(stdtrit(fitted.coverage_freedom, 0.975))
    found = []
    for response in y:
        ratio = (a - response) / (response - d)
        x = c * ratio ** (1.0 / b)
        share = 1.0 / (1.0 + ratio)
        rest = 1.0 - share
        fall = (a - d) * share * rest
        j = (share, rest, fall * b / c, -fall * math.log(x / c))
        own = 0.0
        for i in range(4):
            for k in range(4):
                own += j[i] * v[i][k] * j[k]
        half = q * math.sqrt(reading + own) / abs(fall * b / x)
        found.append((x, x - half, x + half))
    return found


def with_arrays(fitted: calib.Curve, y: list[float]) -> list[tuple[float, float, float]]:
    """The same with numpy's product for the variance of the curve."""
    a, d, c, b = fitted.values
    reading, q = fitted.scale**2, stdtrit(fitted.coverage_freedom, 0.975)
    found = []
    for response in y:
        ratio = (a - response) / (response - d)
        x = c * ratio ** (1.0 / b)
        share = 1.0 / (1.0 + ratio)
        fall = (a - d) * share * (1.0 - share)
        j = np.array([share, 1.0 - share, fall * b / c, -fall * np.log(x / c)])
        half = q * np.sqrt(reading + j @ fitted.covariance @ j) / abs(fall * b / x)
        found.append((x, x - half, x + half))
    return found


def by_parts(fitted: calib.Curve, y: list[float]) -> list[tuple[float, float, float]]:
    """The same from the parts of the curve, called for one unknown at a time."""
    model, p = fitted.response_model, fitted.values
    q = float(stdtrit(fitted.coverage_freedom, 0.975))
    found = []
    for response in y:
        x = float(model.inverse(response, p))
        variance = float(fitted.reading_variance(x)) + float(fitted.fit_variance(x))
        half = q * math.sqrt(variance) / abs(float(model.slope(x, p)))
        found.append((x, x - half, x + half))
    return found


def by_root_finder(fitted: calib.Curve, y: list[float]) -> list[tuple[float, float]]:
    """Ends of the band, one unknown at a time."""
    return [band_interval(fitted, each) for each in y]


# Interval, unknowns, the loop, over how many of them: over more it only repeats itself, as the
# time an unknown is what counts.
CASES = (
    ("delta", 1_000_000, "the curve's own parts", by_parts, 200),
    ("delta", 1_000_000, "closed form, covariance as an array", with_arrays, 1_000),
    ("delta", 1_000_000, "closed form in plain floats", closed_form, 2_000),
    ("inversion", 1_000, "brentq on the band", by_root_finder, 20),
)


def main() -> None:
    """Print the table."""
    print(f"{'interval':12}{'unknowns':>10}{'a second':>12}{'ratio':>9}   lowest–highest   a loop over")
    fitted = curve()
    for interval, count, name, loop, looped in CASES:
        y = responses(count)
        seconds = measure(
            {
                "loop": partial(loop, fitted, y[:looped].tolist()),
                "calib": partial(fitted.invert, y, interval=interval),
            },
            ROUNDS,
        )
        median, low, high = (count / looped * v for v in ratios(seconds, "loop", "calib"))
        rate = count / statistics.median(seconds["calib"])
        print(f"{interval:12}{count:10}{rate:12.0f}{median:9.1f}   {low:.1f}–{high:.1f}   {name}", flush=True)


if __name__ == "__main__":
    main()
