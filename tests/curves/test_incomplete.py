"""Curves whose standards stop short of the plateau: parameters are not identified, values inside stand."""

from __future__ import annotations

import numpy as np
import pytest
from made_standards import LEVELS, RISING

import calib
from calib.models import response_model
from calib.report.curve_wording import parameter_rows

RUNS = 150


def partial(top: float, runs: int = RUNS, seed: int = 1):
    """Runs of eight levels threefold up to ``top``, sd = 0.04·mean^0.8, and the true curve's responses."""
    x = np.repeat(LEVELS * top / 1000.0, 2)
    mean = response_model("4PL").response(x, RISING)
    noise = 0.04 * mean**0.8 * np.random.default_rng(seed).standard_normal((runs, x.size))
    return calib.fit_stack(x, mean + noise, noise=calib.assumed_noise("response", 1.6))


@pytest.mark.parametrize(("top", "least"), [(50.0, 0.93), (25.0, 0.93)])
def test_a_curve_that_reaches_a_third_of_its_span_is_flagged(top: float, least: float) -> None:
    """97 and 99 % in a large simulation of curves that reach 30 and 16 % of the span."""
    assert np.mean([not curve.identified for curve in partial(top)]) >= least


@pytest.mark.parametrize("top", [1000.0, 300.0])
def test_a_curve_that_reaches_four_fifths_of_it_is_not(top: float) -> None:
    """None of 4000 in a large simulation at 94 and 79 % of the span."""
    assert np.mean([not curve.identified for curve in partial(top)]) <= 0.02


@pytest.mark.parametrize("top", [100.0, 50.0, 25.0])
def test_intervals_inside_the_standards_cover_all_the_same(top: float) -> None:
    """Mean over four concentrations of 150 runs; standard error about one point."""
    rng = np.random.default_rng(3)
    at = top * np.array([0.02, 0.1, 0.4, 0.9])
    mean = response_model("4PL").response(at, RISING)
    inside = []
    for curve in partial(top, seed=2):
        new = mean + 0.04 * mean**0.8 * rng.standard_normal(at.size)
        lower, upper = curve.prediction_band(at)
        inside.append((lower <= new) & (new <= upper))
    assert np.mean(inside) == pytest.approx(0.95, abs=0.03)


def test_standards_are_read_back_where_the_parameters_mean_nothing() -> None:
    curve = next(c for c in partial(25.0) if not c.identified)
    found = curve.back_calculate()
    middle = slice(8, 16)
    assert np.all(np.abs(found.relative_error[middle]) < 0.5)
    assert np.isfinite(curve.invert(curve.predict([3.0, 8.0])).value).all()


def test_such_parameters_are_said_to_be_not_identified() -> None:
    curve = next(c for c in partial(25.0) if not c.identified)
    rows = parameter_rows(curve, "ug/L", "1")
    assert {(value, u) for _, _, value, u, _ in rows} == {("not identified", "–")}
    whole = partial(1000.0, runs=1)[0]
    assert all(value != "not identified" for _, _, value, _, _ in parameter_rows(whole, "ug/L", "1"))
