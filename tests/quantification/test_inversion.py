"""Intervals of unknowns: what they satisfy, and what is said when they are open."""

from __future__ import annotations

import numpy as np
import pytest
from made_curves import FALLING, LEVELS, RISING, assay_curve, line_curve

import calib
from calib import Component, Curve
from calib.curves.quantiles import two_sided
from calib.errors import InputError, ModelError
from calib.models import response_model

# Responses from beyond one plateau to beyond the other, for plateaus at 0.05 and 2.5.
SWEEP = np.linspace(-0.6, 3.2, 381)
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


def band_excess(curve: Curve, x: np.ndarray, y: np.ndarray, m: int, extra: float = 0.0) -> np.ndarray:
    """|y − f| over q·se at concentrations x, put together from the parts."""
    j = curve.response_model.gradient(x, curve.values)
    own = np.einsum("ni,ij,nj->n", j, curve.covariance, j)
    g = curve.noise.variance(curve.predict(x), x)
    slope = curve.response_model.slope(x, curve.values)
    se = np.sqrt(curve.residual_sd**2 * g / m + own + (x * slope) ** 2 * extra)
    return np.abs(y - curve.predict(x)) / se


@pytest.mark.parametrize("m", [1, 3])
@pytest.mark.parametrize("name", CURVES)
def test_end_points_lie_on_the_prediction_band(name: str, m: int) -> None:
    curve = CURVES[name]
    quantity = curve.invert(SWEEP, replicates=m)
    q = float(two_sided(curve.degrees_of_freedom, 0.95))
    for ends in (quantity.lower, quantity.upper):
        closed = np.isfinite(ends) & (ends > 0)
        assert closed.sum() > 50
        np.testing.assert_allclose(band_excess(curve, ends[closed], SWEEP[closed], m), q, rtol=1e-8)


def test_end_points_with_further_components_lie_on_the_widened_band() -> None:
    curve = CURVES["rising"]
    quantity = curve.invert([1.0, 1.4], components=[Component("standard", 0.03), Component("dilution", 0.04)])
    q = quantity.k
    for ends in (quantity.lower, quantity.upper):
        found = band_excess(curve, ends, np.array([1.0, 1.4]), 1, extra=0.05**2)
        np.testing.assert_allclose(found, q, rtol=1e-8)


@pytest.mark.parametrize("name", CURVES)
def test_inside_the_interval_the_response_agrees_everywhere(name: str) -> None:
    """The part reported is connected: no point inside lies off the band."""
    curve = CURVES[name]
    quantity = curve.invert(SWEEP)
    q = float(two_sided(curve.degrees_of_freedom, 0.95))
    for i in np.flatnonzero(np.array(quantity.state) == "ok")[::25]:
        x = np.geomspace(quantity.lower[i], quantity.upper[i], 203)[1:-1]
        assert (band_excess(curve, x, np.full(x.size, SWEEP[i]), 1) < q).all()


@pytest.mark.parametrize("m", [1, 2, 8])
@pytest.mark.parametrize("name", CURVES)
def test_an_open_interval_never_comes_with_a_plus_minus(name: str, m: int) -> None:
    quantity = CURVES[name].invert(SWEEP, replicates=m)
    state = np.array(quantity.state)
    open_end = (quantity.lower <= 0) | np.isinf(quantity.upper)
    ok = state == "ok"
    assert not (ok & open_end).any()
    assert (np.isfinite(quantity.k) == ok).all()
    assert (np.isfinite(quantity.expanded) == ok).all()
    assert np.isnan(quantity.u[open_end]).all()
    assert np.isin(state[open_end], ["open-above", "open-below", "no-estimate"]).all()
    closed = ok | (state == "asymmetric")
    assert (quantity.lower[closed] < quantity.value[closed]).all()
    assert (quantity.value[closed] < quantity.upper[closed]).all()
    assert np.isnan(quantity.value[np.isin(state, ["no-estimate", "off-curve"])]).all()


@pytest.mark.parametrize("name", CURVES)
def test_ok_means_sides_of_similar_length_in_ln_x(name: str) -> None:
    quantity = CURVES[name].invert(SWEEP)
    state = np.array(quantity.state)
    for label in ("ok", "asymmetric"):
        these = state == label
        down = np.log(quantity.value[these] / quantity.lower[these])
        up = np.log(quantity.upper[these] / quantity.value[these])
        longer = np.maximum(down, up) / np.minimum(down, up)
        assert (longer <= 1.25).all() if label == "ok" else (longer > 1.25).all()


@pytest.mark.parametrize("name", ["rising", "falling"])
def test_states_and_positions_along_the_response(name: str) -> None:
    curve = CURVES[name]
    low, high = curve.parameters["zero"], curve.parameters["infinite"]
    share = np.array([-0.5, -0.01, 0.001, 0.03, 0.5, 0.925, 0.985, 1.005, 1.5])
    quantity = curve.invert(low + share * (high - low))
    assert quantity.state == (
        "off-curve",
        "no-estimate",
        "open-below",
        "asymmetric",
        "ok",
        "asymmetric",
        "open-above",
        "no-estimate",
        "off-curve",
    )
    assert quantity.position == (
        "below", "below", "below", "inside", "inside", "inside", "above", "above", "above"
    )  # fmt: skip


@pytest.mark.parametrize("name", ["rising", "falling"])
def test_on_the_far_side_of_the_zero_response_there_is_an_upper_limit_only(name: str) -> None:
    curve = CURVES[name]
    zero, infinite = curve.parameters["zero"], curve.parameters["infinite"]
    quantity = curve.invert([zero - 0.01 * (infinite - zero)])
    assert quantity.state == ("no-estimate",)
    assert np.isnan(quantity.value[0])
    assert quantity.lower[0] == 0.0
    assert 0.0 < quantity.upper[0] < 20.0
    assert quantity.position == ("below",)


@pytest.mark.parametrize("name", ["rising", "falling"])
def test_beyond_the_far_plateau_there_is_a_lower_limit_only(name: str) -> None:
    curve = CURVES[name]
    zero, infinite = curve.parameters["zero"], curve.parameters["infinite"]
    quantity = curve.invert([infinite + 0.005 * (infinite - zero)])
    assert np.isnan(quantity.value[0])
    assert np.isposinf(quantity.upper[0])
    assert 100.0 < quantity.lower[0] < 5000.0


def test_off_the_curve_there_is_no_limit_at_all() -> None:
    quantity = CURVES["rising"].invert([5.0])
    assert quantity.state == ("off-curve",)
    for name in ("value", "lower", "upper", "u", "k"):
        assert np.isnan(getattr(quantity, name)).all(), name


def test_replicates_shorten_the_interval() -> None:
    quantity = CURVES["rising"].invert([1.2, 1.2, 1.2], replicates=[1, 2, 8])
    assert (np.diff(quantity.upper / quantity.lower) < 0).all()
    assert (np.diff(quantity.u) < 0).all()


def test_higher_confidence_widens_the_interval() -> None:
    at_95, at_99 = CURVES["rising"].invert([1.2]), CURVES["rising"].invert([1.2], confidence=0.99)
    assert at_99.lower[0] < at_95.lower[0] < at_95.upper[0] < at_99.upper[0]
    assert at_99.u[0] == at_95.u[0]


def test_delta_and_inversion_agree_where_the_interval_is_short() -> None:
    curve = assay_curve(sd=0.002)
    delta, inversion = curve.invert([0.6, 1.2], interval="delta"), curve.invert([0.6, 1.2])
    np.testing.assert_array_equal(delta.value, inversion.value)
    np.testing.assert_array_equal(delta.u, inversion.u)
    half = delta.upper - delta.value
    np.testing.assert_allclose(inversion.lower, delta.lower, atol=0.01 * half.max())
    np.testing.assert_allclose(inversion.upper, delta.upper, atol=0.01 * half.max())


def test_delta_is_value_plus_minus_quantile_times_u() -> None:
    curve = CURVES["rising"]
    delta = curve.invert([1.2], interval="delta")
    x = delta.value
    j = curve.response_model.gradient(x, curve.values)[0]
    slope = curve.response_model.slope(x, curve.values)[0]
    u = np.sqrt(curve.residual_sd**2 + j @ curve.covariance @ j) / slope
    assert delta.u[0] == pytest.approx(u, rel=1e-12)
    assert delta.upper[0] - x[0] == pytest.approx(2.17881283 * u, rel=1e-8)  # t(0.975, 12)


def test_a_further_stretch_on_a_partial_curve_is_reported() -> None:
    """Standards up to half the midpoint: the plateau end of the band reaches back to the response."""
    x = np.repeat(np.geomspace(0.457, 50.0, 8), 2)
    y = response_model("4PL").response(x, RISING) + np.random.default_rng(0).normal(0.0, 0.02, x.size)
    curve = calib.fit(x, y)
    quantity = curve.invert([0.6])
    assert quantity.second_region[0]
    assert not CURVES["rising"].invert([0.6]).second_region[0]


def test_many_unknowns_are_read_like_single_ones() -> None:
    curve = CURVES["rising"]
    together = curve.invert(np.tile(SWEEP, 2))
    for i in (0, 100, 200, 380, 500):
        alone = curve.invert([np.tile(SWEEP, 2)[i]])
        np.testing.assert_allclose(alone.lower, together.lower[[i]], rtol=1e-12)
        np.testing.assert_allclose(alone.upper, together.upper[[i]], rtol=1e-12)
        assert alone.state[0] == together.state[i]


@pytest.mark.parametrize(
    ("settings", "message"),
    [
        ({"responses": [1.0, np.nan]}, r"responses\[1\] is not a finite number"),
        ({"replicates": 0}, "whole number of at least 1"),
        ({"replicates": 1.5}, "whole number of at least 1"),
        ({"replicates": [1, 2, 3]}, "one for each response"),
        ({"confidence": 95.0}, "must lie between 0 and 1"),
        ({"interval": "bootstrap"}, "unknown interval 'bootstrap'; known are inversion, delta"),
    ],
)
def test_refused(settings: dict[str, object], message: str) -> None:
    with pytest.raises(InputError, match=message):
        CURVES["rising"].invert(**{"responses": [1.0]} | settings)  # type: ignore[arg-type]


def test_a_curve_that_was_not_fitted_reads_nothing() -> None:
    with pytest.raises(ModelError, match="nothing can be read from it"):
        calib.fit([1, 2], [1, 2], model="4PL").invert([1.0])


def test_plain_axis_may_give_negative_concentrations() -> None:
    quantity = line_curve().invert([0.0])
    assert quantity.value[0] < 0
    assert quantity.position == ("below",)
    assert quantity.state == ("ok",)
