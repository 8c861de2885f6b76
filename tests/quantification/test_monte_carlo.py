"""Intervals by propagating distributions: exact cases, the inversion, and what is never dropped."""

from __future__ import annotations

import tracemalloc
from typing import Any

import numpy as np
import pytest
from made_curves import FALLING, LEVELS, RISING, assay_curve, line_curve
from scipy.special import stdtrit

import calib
from calib import Component, Curve
from calib.curves.chance import SEED
from calib.curves.quantiles import two_sided
from calib.errors import InputError
from calib.models import response_model
from calib.quantification.inverse import invert
from calib.quantification.monte_carlo import TRIALS

SWEEP = np.linspace(-0.6, 3.2, 39)
CURVES = {
    "rising": assay_curve(RISING),
    "falling": assay_curve(FALLING),
    "relative noise": calib.fit(
        LEVELS, response_model("4PL").response(LEVELS, RISING) * np.tile([0.97, 1.03], 8), noise="relative"
    ),
    "saturation": calib.fit(
        LEVELS,
        response_model("saturation").response(LEVELS, (0.05, 2.5, 90.0)) + np.tile([0.02, -0.02], 8),
        model="saturation",
    ),
}


def index_h(curve: Curve, y: np.ndarray, m: int) -> np.ndarray:
    """Fieller-type index (m,) of the nearer asymptote: q·se there over the distance to the response."""
    model = curve.response_model
    q = float(two_sided(curve.degrees_of_freedom, 0.95))
    largest = np.zeros(y.size)
    for limit in (model.limit_at_zero(curve.values), model.limit_at_infinity(curve.values)):
        assert limit is not None
        g = float(curve.noise.variance(np.array(limit.response), np.array(1.0)))
        own = limit.gradient @ curve.covariance @ limit.gradient
        h = q * np.sqrt(curve.residual_sd**2 * g / m + own) / np.abs(limit.response - y)
        largest = np.maximum(largest, h)
    return largest


@pytest.mark.parametrize("m", [1, 3])
@pytest.mark.parametrize("name", CURVES)
def test_it_agrees_with_the_inversion_where_the_asymptotes_are_far(name: str, m: int) -> None:
    """Either end within 3 % of the length in ln x where h < 0.25; found: 1.1 % at most."""
    curve = CURVES[name]
    y = np.linspace(0.12, 2.4, 20)
    y = y[index_h(curve, y, m) < 0.25]
    assert y.size >= 7
    inversion = curve.invert(y, replicates=m)
    drawn = curve.invert(y, replicates=m, interval="monte-carlo")
    length = np.log(inversion.upper / inversion.lower)
    assert (np.abs(np.log(drawn.lower / inversion.lower)) < 0.03 * length).all()
    assert (np.abs(np.log(drawn.upper / inversion.upper)) < 0.03 * length).all()
    for same in ("value", "degrees_of_freedom", "second_region"):
        np.testing.assert_array_equal(getattr(drawn, same), getattr(inversion, same))


@pytest.mark.parametrize("kind", ["line", "quadratic", "custom"])
def test_it_agrees_with_the_inversion_on_the_plain_axis(kind: str) -> None:
    x, rng = np.linspace(0.0, 10.0, 12), np.random.default_rng(1)
    if kind == "line":
        curve, y = line_curve(), np.array([0.0, 12.0, 20.0, 40.0])
    elif kind == "quadratic":
        curve = calib.fit(x, 25.0 * x - x**2 + rng.normal(0.0, 2.0, 12), model="quadratic")
        y = np.array([20.0, 60.0, 120.0])
    else:
        decay = calib.custom_model("decay", ("height", "rate"), lambda x, h, r: h * np.exp(-r * x))
        start = {"height": 1.0, "rate": 1.0}
        curve = calib.fit(x / 3, 3.0 * np.exp(-x / 6) + rng.normal(0.0, 0.03, 12), model=decay, start=start)
        y = np.array([0.8, 1.5, 2.5])
    inversion, drawn = curve.invert(y), curve.invert(y, interval="monte-carlo")
    length = inversion.upper - inversion.lower
    assert (np.abs(drawn.lower - inversion.lower) < 0.01 * length).all()
    assert (np.abs(drawn.upper - inversion.upper) < 0.01 * length).all()


def mean_curve(scatter: float = 1.0, readings: int = 7, **given: Any) -> Curve:
    """A line of slope 1 whose only free parameter is the intercept."""
    y = scatter * np.random.default_rng(2).normal(size=readings)
    x = np.arange(readings, dtype=np.float64)
    return calib.fit(x, x + y, model="line", fixed={"slope": 1.0}, **given)


def test_reading_and_curve_share_one_scale() -> None:
    """Both deviate by the same s: the difference is a t of its ν exactly, t(0.975, 2) = 4.302653.

    With a scale of its own for each, the factor would be 4.62 (simulated). Trials 1e6: the standard
    error of this quantile is 0.3 %.
    """
    curve = mean_curve(readings=3)
    found = invert(curve, [3.0], replicates=3, interval="monte-carlo", trials=1_000_000)
    half = 4.302653 * curve.residual_sd * np.sqrt(1.0 / 3.0 + 1.0 / 3.0)
    assert found.upper[0] - found.value[0] == pytest.approx(half, rel=0.015)
    assert found.value[0] - found.lower[0] == pytest.approx(half, rel=0.015)


def test_the_sum_of_four_normal_quantities() -> None:
    """JCGM 101:2008, 9.2.2: four N(0, 1) add to u = 2.00 and a 95 % interval of ±3.92 (from memory).

    Here three parts are the reading, known to √3, and one the intercept from three standards. The
    rectangular inputs of 9.2.3, 9.2.4, 9.3 and 9.5 have no place in a calibration curve.
    """
    curve = mean_curve(0.1, readings=3, u=np.sqrt(3.0))
    y = curve.predict([0.0])
    found = invert(curve, y, interval="monte-carlo", trials=1_000_000)
    assert found.u[0] == pytest.approx(2.0, rel=1e-9)
    # Standard error of the quantile 0.1 %.
    assert found.lower[0] == pytest.approx(-3.92, abs=0.02)
    assert found.upper[0] == pytest.approx(3.92, abs=0.02)


@pytest.mark.parametrize("freedom", [4.0, np.inf])
def test_a_component_is_drawn_from_its_own_t(freedom: float) -> None:
    """Scaled and shifted t of JCGM 101:2008, 6.4.9, in ln x; everything else is negligible."""
    curve = assay_curve(sd=1e-6)
    found = invert(curve, [1.2], components=[Component("lot", 0.05, freedom)], interval="monte-carlo")
    t = float(stdtrit(4.0, 0.975)) if np.isfinite(freedom) else 1.959964
    assert np.log(found.upper[0] / found.value[0]) == pytest.approx(0.05 * t, rel=0.025)
    assert np.log(found.lower[0] / found.value[0]) == pytest.approx(-0.05 * t, rel=0.025)


def test_the_noise_is_that_of_the_candidate() -> None:
    """y = b·x·(1 + s·t): the limits are y/(b(1 ± q·s)), not y/b·(1 ± q·s)."""
    x = np.repeat(np.linspace(1.0, 10.0, 50), 4)
    y = 2.0 * x * (1.0 + 0.1 * np.random.default_rng(3).normal(size=200))
    curve = calib.fit(x, y, model="proportional", noise="relative")
    found = curve.invert([8.0], interval="monte-carlo")
    q = float(two_sided(199, 0.95)) * curve.residual_sd * np.sqrt(1.0 + 1.0 / 200.0)
    assert found.lower[0] == pytest.approx(found.value[0] / (1.0 + q), rel=0.005)
    assert found.upper[0] == pytest.approx(found.value[0] / (1.0 - q), rel=0.005)


@pytest.mark.parametrize("name", CURVES)
def test_draws_that_reach_nothing_open_the_end(name: str) -> None:
    """States mean what they mean in the inversion; an open end never comes with a ±."""
    curve = CURVES[name]
    drawn, inversion = curve.invert(SWEEP, interval="monte-carlo"), curve.invert(SWEEP)
    state = np.array(drawn.state)
    open_end = (drawn.lower <= 0) | np.isposinf(drawn.upper)
    assert {"open-above", "ok", "off-curve"} <= set(drawn.state)
    assert np.isin(state[open_end], ["open-above", "open-below", "no-estimate"]).all()
    assert (np.isfinite(drawn.k) == (state == "ok")).all()
    assert np.isnan(drawn.u[open_end]).all()
    assert (drawn.lower[state == "open-below"] == 0.0).all()
    assert np.isposinf(drawn.upper[state == "open-above"]).all()
    assert np.isnan(drawn.value[np.isin(state, ["no-estimate", "off-curve"])]).all()
    assert drawn.position == inversion.position
    assert (state == np.array(inversion.state)).mean() >= 0.9


def test_the_share_of_draws_beyond_the_plateau_decides() -> None:
    """An end that is open at 98 % confidence is closed at 80 %."""
    curve = CURVES["rising"]
    y = [curve.parameters["infinite"] - 0.06]
    wide, narrow = (curve.invert(y, interval="monte-carlo", confidence=c) for c in (0.98, 0.8))
    assert np.isposinf(wide.upper).all()
    assert np.isfinite(narrow.upper).all()


def test_without_residual_freedom_there_is_no_limit() -> None:
    found = calib.fit([1, 2], [2.0, 4.1], model="line").invert([3.0], interval="monte-carlo")
    assert found.state == ("no-estimate",)
    assert np.isneginf(found.lower).all()
    assert np.isposinf(found.upper).all()


def test_the_same_seed_gives_the_same_limits_to_the_bit() -> None:
    curve, y = CURVES["rising"], [0.6, 1.2]
    first, again = (curve.invert(y, interval="monte-carlo", seed=7) for _ in range(2))
    np.testing.assert_array_equal(first.lower, again.lower)
    np.testing.assert_array_equal(first.upper, again.upper)
    assert (first.seed, first.trials) == (7, TRIALS)
    other = curve.invert(y, interval="monte-carlo", seed=8)
    assert (other.lower != first.lower).all()
    assert curve.invert(y, interval="monte-carlo").seed == SEED
    assert (curve.invert(y).seed, curve.invert(y).trials) == (None, None)


def test_an_unknown_does_not_depend_on_those_it_is_read_with() -> None:
    curve = CURVES["falling"]
    together = curve.invert([0.6, 1.2, 1.8], replicates=[1, 3, 1], interval="monte-carlo")
    alone = curve.invert([1.2], replicates=3, interval="monte-carlo")
    assert (alone.lower[0], alone.upper[0]) == (together.lower[1], together.upper[1])


@pytest.mark.parametrize(("k_x", "k_y"), [(1e-6, 1e6), (1e6, 1e-6)])
def test_units_do_not_change_the_answer(k_x: float, k_y: float) -> None:
    curve = CURVES["rising"]
    y = np.array([0.6, 1.2, 2.45])
    there = calib.fit(k_x * LEVELS, k_y * curve.standards.response).invert(k_y * y, interval="monte-carlo")
    here = curve.invert(y, interval="monte-carlo")
    np.testing.assert_allclose(there.lower / k_x, here.lower, rtol=1e-7)
    np.testing.assert_allclose(there.upper / k_x, here.upper, rtol=1e-7)
    assert there.state == here.state


def test_memory_does_not_grow_with_the_unknowns() -> None:
    def peak(unknowns: int) -> int:
        tracemalloc.start()
        invert(CURVES["rising"], np.full(unknowns, 1.2), interval="monte-carlo", trials=100_000)
        highest = tracemalloc.get_traced_memory()[1]
        tracemalloc.stop()
        return highest

    assert peak(12) < 1.1 * peak(1)


@pytest.mark.parametrize(
    ("given", "message"),
    [
        ({"trials": 99_999}, "trials = 99999 are too few to rank; use at least 100000"),
        ({"seed": -1}, "seed -1 must be a whole number of at least 0"),
        ({"seed": 0.5}, "seed 0.5 must be a whole number"),
    ],
)
def test_refused(given: dict[str, Any], message: str) -> None:
    with pytest.raises(InputError, match=message):
        invert(CURVES["rising"], [1.2], interval="monte-carlo", **given)
