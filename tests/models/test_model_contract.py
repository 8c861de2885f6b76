"""Every response model against its plain formula: the contract of `ResponseModel`."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest
from plain_formulas import CONCENTRATIONS, EXAMPLES, PLAIN, complex_step

from calib.errors import ModelError
from calib.models import RESPONSE_MODELS, ResponseModel, response_model

MODELS = {model.name: model for model in RESPONSE_MODELS}
CASES = [(name, p) for name, parameters in EXAMPLES.items() for p in parameters]
LOGARITHMIC = [(name, p) for name, p in CASES if MODELS[name].logarithmic]
SCALES = (1e-6, 1.0, 1e6)
Limit = Callable[[ResponseModel, tuple[float, ...]], object]


def nudged(name: str, p: tuple[float, ...], index: int) -> Callable[[complex], np.ndarray]:
    """The plain formula as a function of one parameter, over all concentrations."""
    return lambda value: PLAIN[name](CONCENTRATIONS, *[value if i == index else v for i, v in enumerate(p)])


def test_every_model_has_a_plain_formula() -> None:
    assert set(MODELS) == set(PLAIN) == set(EXAMPLES)


@pytest.mark.parametrize("name", MODELS)
def test_a_key_finds_its_model(name: str) -> None:
    assert response_model(name) is MODELS[name]


def test_an_unknown_key_is_refused_with_the_known_ones() -> None:
    with pytest.raises(ModelError, match=r"unknown response model '3PL'.*saturation.*4PL"):
        response_model("3PL")


@pytest.mark.parametrize(("name", "p"), CASES)
def test_response(name: str, p: tuple[float, ...]) -> None:
    found = MODELS[name].response(CONCENTRATIONS, p)
    np.testing.assert_allclose(found, PLAIN[name](CONCENTRATIONS, *p), rtol=1e-13)


@pytest.mark.parametrize(("name", "p"), CASES)
def test_gradient_in_the_parameters(name: str, p: tuple[float, ...]) -> None:
    expected = np.stack([complex_step(nudged(name, p, i), v) for i, v in enumerate(p)], axis=-1)
    found = MODELS[name].gradient(CONCENTRATIONS, p)
    # Where a derivative passes through zero the largest of its column sets the scale.
    np.testing.assert_allclose(found, expected, rtol=1e-9, atol=1e-14 * np.abs(expected).max())


@pytest.mark.parametrize(("name", "p"), CASES)
def test_slope_in_the_concentration(name: str, p: tuple[float, ...]) -> None:
    expected = complex_step(lambda x: PLAIN[name](x, *p), CONCENTRATIONS)
    np.testing.assert_allclose(MODELS[name].slope(CONCENTRATIONS, p), expected, rtol=1e-9)


@pytest.mark.parametrize(("name", "p"), CASES)
def test_inverse_gives_the_concentration_back(name: str, p: tuple[float, ...]) -> None:
    """To 1e-9 while the response is farther than 1e-6 of the span from either plateau."""
    model = MODELS[name]
    x = np.geomspace(1e-7, 1e7, 141) if model.logarithmic else np.linspace(-3.0, 60.0, 64)
    y = model.response(x, p)
    limits = [limit.response for limit in (model.limit_at_zero(p), model.limit_at_infinity(p)) if limit]
    span = abs(limits[0] - limits[1]) if len(limits) == 2 else 1.0
    far = np.all([np.abs(y - limit) > 1e-6 * span for limit in limits], axis=0) if limits else y == y
    assert far.sum() > 10
    np.testing.assert_allclose(model.inverse(y[far], p), x[far], rtol=1e-9, atol=1e-12)


@pytest.mark.parametrize(("name", "p"), LOGARITHMIC)
def test_zero_concentration_is_exact(name: str, p: tuple[float, ...]) -> None:
    model = MODELS[name]
    limit = model.limit_at_zero(p)
    assert limit is not None
    assert model.response(0.0, p) == limit.response
    assert model.inverse(limit.response, p) == 0.0
    np.testing.assert_array_equal(model.gradient(0.0, p), limit.gradient)


@pytest.mark.parametrize(("name", "p"), LOGARITHMIC)
def test_limits_are_approached(name: str, p: tuple[float, ...]) -> None:
    model = MODELS[name]
    for limit, x in ((model.limit_at_zero(p), 1e-40), (model.limit_at_infinity(p), 1e40)):
        if limit is None:
            continue
        size = abs(limit.response) + 1.0
        assert model.response(x, p) == pytest.approx(limit.response, abs=1e-12 * size)
        np.testing.assert_allclose(model.gradient(x, p), limit.gradient, atol=1e-9 * size)


@pytest.mark.parametrize(("name", "p"), LOGARITHMIC)
def test_responses_beyond_the_plateaus_have_no_concentration(name: str, p: tuple[float, ...]) -> None:
    model = MODELS[name]
    zero, infinite = model.limit_at_zero(p), model.limit_at_infinity(p)
    rising = model.response(2.0, p) > zero.response
    outward = -1.0 if rising else 1.0
    assert np.isnan(model.inverse(zero.response + outward * 1e-3, p))
    if infinite is not None:
        assert np.isnan(model.inverse(infinite.response, p))
        assert np.isnan(model.inverse(infinite.response - outward * 1e-3, p))


def test_a_quadratic_never_reaches_a_response_beyond_its_turning_point() -> None:
    p = EXAMPLES["quadratic"][0]
    top = p[0] - p[1] ** 2 / (4 * p[2])
    assert np.isnan(MODELS["quadratic"].inverse(top + 1e-6, p))


@pytest.mark.parametrize("name", ["line", "proportional"])
def test_a_line_without_slope_has_no_inverse(name: str) -> None:
    flat = (0.0,) * len(MODELS[name].names)
    assert np.isnan(MODELS[name].inverse(1.0, flat))


@pytest.mark.parametrize(("name", "p"), CASES)
def test_a_stack_of_curves_is_evaluated_like_single_ones(name: str, p: tuple[float, ...]) -> None:
    model = MODELS[name]
    rows = np.array(p) * np.array([[1.0], [1.1], [0.9]])
    columns = [rows[:, [i]] for i in range(len(p))]
    for what in ("response", "gradient", "slope"):
        together = getattr(model, what)(CONCENTRATIONS, columns)
        alone = [getattr(model, what)(CONCENTRATIONS, row) for row in rows]
        np.testing.assert_array_equal(together, alone, err_msg=what)
    y = model.response(CONCENTRATIONS, columns)
    np.testing.assert_allclose(model.inverse(y, columns), np.broadcast_to(CONCENTRATIONS, y.shape), rtol=1e-9)


@pytest.mark.parametrize("concentration_scale", SCALES)
@pytest.mark.parametrize("response_scale", SCALES)
@pytest.mark.parametrize("direction", [1.0, -1.0])
@pytest.mark.parametrize("name", MODELS)
def test_start_is_finite_and_inside_the_bounds(
    name: str, direction: float, response_scale: float, concentration_scale: float
) -> None:
    model = MODELS[name]
    x = np.array([0.0, 0.1, 0.5, 1.0, 5.0, 20.0])
    y = response_scale * (3.0 + direction * x / (2.0 + x))
    start = model.start(x[:, None] * concentration_scale, y[:, None])[:, 0]
    lower, upper = model.bounds(x * concentration_scale)
    assert start.shape == (len(model.names),)
    assert np.isfinite(start).all()
    assert ((start >= lower) & (start <= upper)).all()
    assert (start[model.positive] > 0).all()


@pytest.mark.parametrize("name", MODELS)
def test_grid_cells_are_finite_and_inside_the_bounds(name: str) -> None:
    model = MODELS[name]
    x = np.array([0.0, 0.1, 0.5, 1.0, 5.0, 20.0])
    cells = model.grid(x)
    lower, upper = (bound[~model.linear] for bound in model.bounds(x))
    assert cells.shape[1] == (~model.linear).sum()
    assert ((cells >= lower) & (cells <= upper)).all()


@pytest.mark.parametrize(("name", "p"), CASES)
def test_the_response_is_linear_in_the_parameters_said_to_be_linear(name: str, p: tuple[float, ...]) -> None:
    model = MODELS[name]
    for i in np.flatnonzero(model.linear):
        moved = [v + 1.5 if j == i else v for j, v in enumerate(p)]
        change = model.response(CONCENTRATIONS, moved) - model.response(CONCENTRATIONS, p)
        expected = 1.5 * model.gradient(CONCENTRATIONS, p)[:, i]
        np.testing.assert_allclose(change, expected, rtol=1e-9, atol=1e-12 * np.abs(p).max())


def test_with_asymmetry_one_the_five_parameter_logistic_is_the_four_parameter_one() -> None:
    p = EXAMPLES["4PL"][0]
    four, five = MODELS["4PL"], MODELS["5PL"]
    np.testing.assert_allclose(
        five.response(CONCENTRATIONS, (*p, 1.0)), four.response(CONCENTRATIONS, p), rtol=1e-14
    )


def test_half_response_concentration_lies_half_way_between_the_plateaus() -> None:
    model, p = MODELS["5PL"], EXAMPLES["5PL"][0]
    middle = model.response(model.half_response_concentration(p), p)
    assert middle == pytest.approx(0.5 * (p[0] + p[1]), rel=1e-12)
