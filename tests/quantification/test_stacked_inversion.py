"""Many unknowns at once are what each of them is alone."""

from __future__ import annotations

import numpy as np
import pytest
from made_curves import FALLING, LEVELS, RISING, assay_curve, line_curve
from scalar_inversion import band_interval

import calib
from calib import Component
from calib.models import response_model
from calib.quantification.roots import bracketed_roots
from calib.quantification.states import TABLED_FROM

SWEEP = np.linspace(-0.3, 2.9, 97)
CURVES = {
    "rising": assay_curve(RISING),
    "falling": assay_curve(FALLING),
    "hardly any noise": assay_curve(RISING, sd=1e-4),
    "relative noise": calib.fit(
        LEVELS, response_model("4PL").response(LEVELS, RISING) * np.tile([0.97, 1.03], 8), noise="relative"
    ),
    "5PL": calib.fit(
        LEVELS,
        response_model("5PL").response(LEVELS, (*RISING, 0.6)) + np.tile([0.02, -0.02], 8),
        model="5PL",
    ),
}
EVERY_CURVE = {**CURVES, "line": line_curve(), "uncertain line": line_curve(slope=0.3, sd=1.0)}


@pytest.mark.parametrize("m", [1, 3])
@pytest.mark.parametrize("name", CURVES)
def test_interval_ends_are_the_roots_another_root_finder_finds(name: str, m: int) -> None:
    """scipy.optimize.brentq on the same band, one unknown at a time."""
    curve = CURVES[name]
    quantity = curve.invert(SWEEP, replicates=m)
    closed = np.flatnonzero(np.isin(quantity.state, ["ok", "asymmetric"]))
    assert closed.size > 50
    alone = np.array([band_interval(curve, y, m) for y in SWEEP[closed]])
    np.testing.assert_allclose(quantity.lower[closed], alone[:, 0], rtol=1e-8)
    np.testing.assert_allclose(quantity.upper[closed], alone[:, 1], rtol=1e-8)


@pytest.mark.parametrize("name", EVERY_CURVE)
def test_no_digit_depends_on_the_other_unknowns(name: str) -> None:
    curve = EVERY_CURVE[name]
    together = curve.invert(SWEEP)
    for i in range(0, SWEEP.size, 8):
        alone = curve.invert(SWEEP[i : i + 1])
        for what in ("value", "u", "lower", "upper"):
            np.testing.assert_allclose(
                getattr(together, what)[i], getattr(alone, what)[0], rtol=1e-13, err_msg=what
            )
        assert (together.state[i], together.position[i]) == (alone.state[0], alone.position[0])


@pytest.mark.parametrize("components", [(), (Component("standard", 0.05, 6.0),)], ids=["", "component"])
@pytest.mark.parametrize("name", EVERY_CURVE)
def test_states_of_very_many_unknowns_are_those_of_the_inversion(
    name: str, components: tuple[Component, ...]
) -> None:
    curve = EVERY_CURVE[name]
    random = np.random.default_rng(5)
    low, high = np.sort(curve.predict(np.array([curve.standards.lowest, curve.standards.highest])))
    y = random.uniform(low - 0.3 * (high - low), high + 0.3 * (high - low), 4 * TABLED_FROM)
    y[:3] = low - 1e6, high + 1e6, low
    m = random.choice([1, 1, 1, 3, 3, 2], y.size)
    assert (np.unique(m, return_counts=True)[1] >= TABLED_FROM).sum() == 2
    many = curve.invert(y, replicates=m, interval="delta", components=components)
    each = curve.invert(y, replicates=m, components=components)
    assert many.state == each.state
    assert many.position == each.position
    np.testing.assert_array_equal(many.second_region, each.second_region)
    np.testing.assert_array_equal(many.k, each.k)
    ok = np.array(each.state) == "ok"
    np.testing.assert_array_equal(many.value[ok], each.value[ok])


def test_a_formula_of_the_user_is_read_back_for_all_unknowns_at_once() -> None:
    decay = calib.custom_model("decay", ("height", "rate"), lambda x, h, r: h * np.exp(-r * x))
    x = np.linspace(0.0, 4.0, 9)
    curve = calib.fit(x, 3.0 * np.exp(-0.5 * x), model=decay, start={"height": 1.0, "rate": 1.0})
    y = np.array([2.9, 1.0, 0.5, -1.0, 50.0])
    expected = np.where((y > 0) & (y < 3.0), np.log(3.0 / np.maximum(y, 1e-9)) / 0.5, np.nan)
    np.testing.assert_allclose(curve.invert(y).value, expected, rtol=1e-9)


def test_roots_in_brackets_of_any_size() -> None:
    power = np.array([1.0, 3.0, 5.0, 9.0])
    root = np.array([1e-8, 0.3, 0.999999, 0.5])
    found = bracketed_roots(lambda t: t**power - root**power, np.zeros(4), np.ones(4))
    np.testing.assert_allclose(found, root, rtol=1e-10, atol=1e-11)


def test_an_undefined_value_bounds_a_root() -> None:
    """The logarithm ends at 0: outside it nothing agrees."""
    with np.errstate(invalid="ignore"):
        found = bracketed_roots(lambda t: np.where(t < 0.25, -1.0, np.nan), np.zeros(1), np.ones(1))
    np.testing.assert_allclose(found, 0.25, rtol=1e-10)
