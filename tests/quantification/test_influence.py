"""What each standard does to what is read from the curve, against refitting in a loop."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from made_curves import FALLING, LEVELS, RISING, assay_curve, line_curve

import calib
from calib import Curve
from calib.errors import InputError, ModelError
from calib.models import response_model
from calib.quantification.inverse import concentration_of

AT = np.array([3.0, 30.0, 300.0])


def readings(truth: tuple[float, ...] = RISING, seed: int = 1) -> np.ndarray:
    noise = np.random.default_rng(seed).normal(0.0, 0.02, LEVELS.size)
    return response_model("4PL").response(LEVELS, truth) + noise


def refitted_change(curve: Curve, at: np.ndarray, **given: Any) -> np.ndarray:
    """Relative change (n, c) by one fit for each reading."""
    x, y = curve.standards.concentration, curve.standards.response
    response = curve.predict(at)
    rows = []
    for i in range(y.size):
        keep = np.arange(y.size) != i
        own = {k: (np.asarray(v)[keep] if k == "u" else v) for k, v in given.items()}
        without = calib.fit(x[keep], y[keep], model=curve.response_model, **own)
        rows.append(concentration_of(without, response) / at - 1.0)
    return np.array(rows)


@pytest.mark.parametrize(
    "given",
    [
        {},
        {"noise": "relative"},
        {"u": 0.01 + 0.02 * np.sqrt(LEVELS)},
        {"fixed": {"zero": 0.05}},
        {"bounds": {"slope": (0.5, 1.15)}},
    ],
    ids=["uniform", "relative", "given", "fixed", "bounded"],
)
@pytest.mark.parametrize("truth", [RISING, FALLING], ids=["rising", "falling"])
def test_it_is_what_refitting_without_each_reading_gives(
    truth: tuple[float, ...], given: dict[str, Any]
) -> None:
    curve = calib.fit(LEVELS, readings(truth), **given)
    found = calib.influence(curve, AT)
    # The floor below which a power of the mean is not followed belongs to the curve's own readings.
    again = given | ({"noise": curve.noise} if "noise" in given else {})
    np.testing.assert_allclose(found.relative_change, refitted_change(curve, AT, **again), atol=1e-9)


def test_a_variance_function_of_the_run_is_not_estimated_again() -> None:
    curve = calib.fit(LEVELS, readings(), noise="power-of-mean")
    expected = refitted_change(curve, AT, noise=curve.noise)
    np.testing.assert_allclose(calib.influence(curve, AT).relative_change, expected, atol=1e-9)


def test_a_custom_model_starts_from_its_own_parameters() -> None:
    x = np.linspace(0.0, 4.0, 9)
    y = 3.0 * np.exp(-0.5 * x) + np.random.default_rng(1).normal(0.0, 0.02, 9)
    decay = calib.custom_model("decay", ("height", "rate"), lambda x, h, r: h * np.exp(-r * x))
    start = {"height": 1.0, "rate": 1.0}
    curve = calib.fit(x, y, model=decay, start=start)
    at = np.array([1.0, 2.0, 3.0])
    expected = refitted_change(curve, at, start=start)
    np.testing.assert_allclose(calib.influence(curve, at).relative_change, expected, atol=1e-7)


@pytest.mark.parametrize("planted", [3, 5, 8, 15])
def test_a_planted_outlier_has_the_largest_influence(planted: int) -> None:
    y = readings()
    y[planted] += 0.4
    found = calib.influence(calib.fit(LEVELS, y), np.geomspace(5.0, 400.0, 9))
    assert found.largest.argmax() == planted
    assert found.cook_distance.argmax() == planted


def test_cook_distance_of_a_line_in_closed_form() -> None:
    """D = e²·h/(p·s²·(1 − h)²) (Cook, Technometrics 19 (1977) 15, eq. 5 to 7; from memory)."""
    curve = line_curve()
    x, y = curve.standards.concentration, curve.standards.response
    design = np.stack([np.ones_like(x), x], axis=1)
    h = np.diag(design @ np.linalg.inv(design.T @ design) @ design.T)
    e = y - curve.predict(x)
    expected = e**2 * h / (2.0 * curve.residual_sd**2 * (1.0 - h) ** 2)
    np.testing.assert_allclose(calib.influence(curve, [5.0]).cook_distance, expected, rtol=1e-9)


def test_without_choice_it_looks_at_the_levels_of_the_working_range() -> None:
    curve = assay_curve()
    found = calib.influence(curve)
    held = calib.working_range(curve)
    levels = np.unique(LEVELS)
    expected = levels[(levels >= held.lowest) & (levels <= held.highest)]
    np.testing.assert_array_equal(found.concentrations, expected)
    assert found.relative_change.shape == (16, expected.size)
    assert found.cook_distance.shape == (16,)


def test_units_do_not_change_it() -> None:
    y = readings()
    here = calib.influence(calib.fit(LEVELS, y), AT)
    there = calib.influence(calib.fit(1e-3 * LEVELS, 1e5 * y), 1e-3 * AT)
    np.testing.assert_allclose(there.relative_change, here.relative_change, atol=1e-8)
    np.testing.assert_allclose(there.cook_distance, here.cook_distance, rtol=1e-5)


def test_a_reading_that_no_curve_can_do_without_is_told() -> None:
    """One reading a level and as many levels as parameters: without any of them there is no curve."""
    curve = calib.fit([1.0, 3.0, 10.0], [1.0, 2.0, 3.0], model="saturation")
    found = calib.influence(curve, [2.0])
    assert np.isnan(found.relative_change).all()
    assert np.isposinf(found.largest).all()
    assert np.isnan(found.cook_distance).all()


def test_it_is_frozen() -> None:
    found = calib.influence(assay_curve(), AT)
    with pytest.raises(ValueError, match="read-only"):
        found.relative_change[0, 0] = 1.0
    with pytest.raises(AttributeError):
        found.cook_distance = AT  # type: ignore[misc]


@pytest.mark.parametrize(
    ("concentrations", "message"),
    [
        ([3.0, 0.0], r"concentrations\[1\] = 0 has no relative change"),
        ([np.nan], r"concentrations\[0\] = nan"),
        ([-1.0], r"concentrations\[0\] = -1"),
        ([], "not empty"),
    ],
)
def test_refused(concentrations: list[float], message: str) -> None:
    with pytest.raises(InputError, match=message):
        calib.influence(assay_curve(), concentrations)


def test_no_working_range_is_said() -> None:
    with pytest.raises(InputError, match="CV of at most 20 %; say at which concentrations"):
        calib.influence(assay_curve(sd=0.6))


def test_a_curve_that_was_not_fitted_is_refused() -> None:
    with pytest.raises(ModelError, match="was not fitted"):
        calib.influence(calib.fit([1, 2], [1, 2], model="4PL"), [1.0])
