"""Simulated runs of a curve: reproducible, and as scattered as theory says."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from made_standards import FALLING, RISING, assay_standards

import calib
from calib.errors import InputError, ModelError


@pytest.mark.parametrize(
    "given",
    [{}, {"noise": "relative"}, {"u": 0.02}, {"relative_sd": 0.01 + 0.01 * np.arange(16)}],
    ids=["uniform", "relative", "known", "given"],
)
@pytest.mark.parametrize("truth", [RISING, FALLING], ids=["rising", "falling"])
def test_standard_errors_agree_with_the_asymptotic_ones(
    truth: tuple[float, ...], given: dict[str, Any]
) -> None:
    """A standard deviation from 4000 runs has a relative standard error of 1/√8000 = 1.1 %.

    3.5 of these, and 2 % for what the linear theory leaves out at this noise (0.5 % of the span).
    """
    x, y = assay_standards(truth, sd=0.01)
    curve = calib.fit(x, y, **given)
    found = calib.bootstrap(curve, runs=4000, seed=11)
    assert found.converged.all()
    if given.get("noise") == "relative" or "relative_sd" in given:
        # Such weights leave one plateau loose; the well-determined parameters are compared.
        names = [n for n, u in curve.standard_errors.items() if u < 0.05 * abs(curve.parameters[n])]
        assert len(names) >= 2
    else:
        names = list(curve.parameters)
    for name in names:
        assert found.standard_errors[name] == pytest.approx(curve.standard_errors[name], rel=0.06), name


def test_the_runs_scatter_about_the_curve() -> None:
    curve = calib.fit(*assay_standards(sd=0.005))
    found = calib.bootstrap(curve, runs=2000, seed=3)
    u = np.array(list(curve.standard_errors.values()))
    assert (np.abs(found.parameters.mean(axis=0) - curve.values) < 5.0 * u / np.sqrt(2000) + 0.05 * u).all()


def test_the_same_seed_gives_the_same_runs_to_the_bit() -> None:
    curve = calib.fit(*assay_standards())
    first, again = calib.bootstrap(curve, runs=50, seed=4), calib.bootstrap(curve, runs=50, seed=4)
    np.testing.assert_array_equal(first.parameters, again.parameters)
    assert first.seed == 4
    assert (calib.bootstrap(curve, runs=50, seed=5).parameters != first.parameters).any()
    usual = calib.bootstrap(curve, runs=50)
    np.testing.assert_array_equal(
        usual.parameters, calib.bootstrap(curve, runs=50, seed=usual.seed).parameters
    )


def test_fixed_and_bounded_parameters_stay() -> None:
    x, y = assay_standards()
    curve = calib.fit(x, y, fixed={"zero": 0.05}, bounds={"slope": (0.5, 1.2)})
    found = calib.bootstrap(curve, runs=200)
    assert (found.parameters[:, 0] == 0.05).all()
    assert found.standard_errors["zero"] == 0.0
    assert (found.parameters[:, 3] <= 1.2 * (1 + 1e-12)).all()
    assert found.at_bound.any()


def test_a_default_that_was_freed_stays_free() -> None:
    x = np.array([0.0, 0.5, 1.0, 2.0, 4.0, 8.0, 16.0])
    y = 3.0 + 100.0 / (1.0 + 0.4 * x) + 0.1 * np.tile([1.0, -1.0], 4)[:7]
    curve = calib.fit(x, y, model="quenching", start={"offset": 1.0})
    assert calib.bootstrap(curve, runs=50).standard_errors["offset"] > 0


def test_a_custom_model_is_simulated_too() -> None:
    x = np.linspace(0.0, 4.0, 9)
    y = 3.0 * np.exp(-0.5 * x) + np.random.default_rng(1).normal(0.0, 0.02, 9)
    decay = calib.custom_model("decay", ("height", "rate"), lambda x, h, r: h * np.exp(-r * x))
    curve = calib.fit(x, y, model=decay, start={"height": 1.0, "rate": 1.0})
    found = calib.bootstrap(curve, runs=150)
    # 1/√300 = 5.8 % for one standard error of a deviation; three of them.
    assert found.standard_errors["rate"] == pytest.approx(curve.standard_errors["rate"], rel=0.18)


@pytest.mark.parametrize(
    ("given", "message"),
    [
        ({"runs": 1}, "runs = 1 must be at least 2"),
        ({"seed": -1}, "seed -1 must be a whole number"),
        ({"seed": 1.5}, "seed 1.5 must be a whole number"),
    ],
)
def test_refused(given: dict[str, Any], message: str) -> None:
    with pytest.raises(InputError, match=message):
        calib.bootstrap(calib.fit(*assay_standards()), **given)


def test_curves_without_a_scatter_to_simulate_are_refused() -> None:
    with pytest.raises(ModelError, match="the scatter to simulate is not known"):
        calib.bootstrap(calib.fit([1, 2], [2.0, 4.1], model="line"))
    with pytest.raises(ModelError, match="was not fitted"):
        calib.bootstrap(calib.fit([1, 2], [1, 2], model="4PL"))
    plane = calib.custom_model("plane", ("a", "b"), lambda x, a, b: a * x[:, 0] + b * x[:, 1])
    x = np.random.default_rng(1).normal(size=(6, 2))
    with pytest.raises(ModelError, match="several columns"):
        calib.bootstrap(
            calib.fit(x, x.sum(axis=1) + 0.01 * x[:, 0] ** 2, model=plane, start={"a": 1, "b": 1})
        )
