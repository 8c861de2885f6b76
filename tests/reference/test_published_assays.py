"""Sigmoid and saturation assays: fits, weights, standard errors and inverse predictions.

The case files give ln midpoint and 1/slope, as their sources do; standard errors are
carried over by u(ln C) = u(C)/C and u(1/b) = u(b)/b².
"""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from published import Agree, case

import calib
from calib import Curve

RUNS = ("01", "02", "04", "06", "08", "09", "11")
FITS = [
    (run, name) for run in RUNS for name in ("3PL", "4PL", "4PL 1/y", "4PL 1/y²", "3PL 1/y²")
    if name in case(f"dnase_run{run}")["fits"]
]  # fmt: skip
# relative_sd for variance ∝ y^0, y^1, y^2 at the observed responses.
POWER = {"": 0.0, "1/y": 0.5, "1/y²": 1.0}


def assay(run: str, name: str, **settings: Any) -> Curve:
    data = case(f"dnase_run{run}")
    kind, _, weight = name.partition(" ")
    fixed = {"zero": 0.0} if kind == "3PL" else None
    if weight:
        settings["relative_sd"] = np.array(data["y"]) ** POWER[weight]
    return calib.fit(data["x"], data["y"], model="4PL", fixed=fixed, **settings)


def in_source_letters(curve: Curve) -> tuple[dict[str, float], dict[str, float]]:
    p, u = curve.parameters, curve.standard_errors
    values = {
        "zero": p["zero"],
        "infinite": p["infinite"],
        "ln midpoint": np.log(p["midpoint"]),
        "1/slope": 1.0 / p["slope"],
    }
    errors = {
        "zero": u["zero"],
        "infinite": u["infinite"],
        "ln midpoint": u["midpoint"] / p["midpoint"],
        "1/slope": u["slope"] / p["slope"] ** 2,
    }
    return values, errors


def assert_fit(curve: Curve, expected: dict[str, Any], label: str, agree: Agree) -> None:
    assert curve.converged
    values, errors = in_source_letters(curve)
    named = [k for k in values if k in expected["se"]]
    agree(label, "parameters", [values[k] for k in named], [expected[k] for k in named], 8)
    agree(label, "standard errors", [errors[k] for k in named], [expected["se"][k] for k in named], 8)
    agree(label, "residual SD", curve.residual_sd, expected["sigma"], 10)


def assert_inverse(curve: Curve, unknowns: list[dict[str, Any]], label: str, agree: Agree) -> None:
    y0, m = [u["y0"] for u in unknowns], [u["m"] for u in unknowns]
    delta = curve.invert(y0, replicates=m, interval="delta")
    inversion = curve.invert(y0, replicates=m)
    agree(label, "x0", delta.value, [u["x0"] for u in unknowns], 8)
    agree(label, "u", delta.u, [u["u"] for u in unknowns], 8)
    agree(label, "delta", np.array([delta.lower, delta.upper]).T, [u["delta"] for u in unknowns], 8)
    limits = np.array([inversion.lower, inversion.upper]).T
    # Where the source found no crossing down to x = 0 the interval must be open there.
    expected = [[0.0 if end is None else end for end in u["inversion"]] for u in unknowns]
    agree(label, "inversion", limits, expected, 8)
    assert [s == "open-below" for s in inversion.state] == [u["inversion"][0] is None for u in unknowns]


@pytest.mark.parametrize(("run", "name"), FITS)
def test_dnase_fit(run: str, name: str, agree: Agree) -> None:
    assert_fit(assay(run, name), case(f"dnase_run{run}")["fits"][name], f"dnase_run{run}", agree)


@pytest.mark.parametrize("run", RUNS)
@pytest.mark.parametrize("name", ["3PL", "4PL"])
def test_dnase_inverse_predictions(run: str, name: str, agree: Agree) -> None:
    assert_inverse(assay(run, name), case(f"dnase_run{run}")[f"inverse {name}"], f"dnase_run{run}", agree)


@pytest.mark.parametrize("run", RUNS)
def test_dnase_midpoint_and_slope(run: str, agree: Agree) -> None:
    hill = case(f"dnase_run{run}")["hill"]
    curve = assay(run, "4PL")
    p, u = curve.parameters, curve.standard_errors
    agree(
        f"dnase_run{run}",
        "midpoint, slope",
        [p["midpoint"], p["slope"]],
        [hill["midpoint"], hill["slope"]],
        8,
    )
    agree(
        f"dnase_run{run}",
        "their standard errors",
        [u["midpoint"], u["slope"]],
        [hill["se midpoint"], hill["se slope"]],
        8,
    )


def test_dnase_run_1_as_printed() -> None:
    printed = case("dnase_run01")["printed"]
    curve = assay("01", "3PL")
    values, errors = in_source_letters(curve)
    tolerance = printed["half unit of the last place"]
    assert values["infinite"] == pytest.approx(printed["Asym"], abs=tolerance)
    assert values["ln midpoint"] == pytest.approx(printed["xmid"], abs=tolerance)
    # Printed 1.04146 where 40-digit arithmetic has 1.0414547: one unit is allowed.
    assert values["1/slope"] == pytest.approx(printed["scal"], abs=2 * tolerance)
    assert errors["infinite"] == pytest.approx(printed["se_Asym"], abs=tolerance)
    assert errors["ln midpoint"] == pytest.approx(printed["se_xmid"], abs=tolerance)
    assert errors["1/slope"] == pytest.approx(printed["se_scal"], abs=tolerance)
    assert curve.residual_sd == pytest.approx(printed["sigma"], abs=tolerance)


@pytest.mark.parametrize(
    "expected", case("dnase_power_of_mean")["fits"], ids=lambda f: f"run{f['run']}-{f['theta']}"
)
def test_weights_that_follow_the_fitted_mean(expected: dict[str, Any], agree: Agree) -> None:
    """Variance ∝ mean^(2·theta); floor 0, as the source has none."""
    noise = calib.assumed_noise("response", exponent=2.0 * expected["theta"])
    curve = assay(f"0{expected['run']}", "3PL", noise=noise)
    assert_fit(curve, expected, "dnase_power_of_mean", agree)


def test_puromycin_as_printed() -> None:
    data = case("puromycin_treated")
    curve = calib.fit(data["x"], data["y"], model="saturation", fixed={"offset": 0.0})
    u = curve.standard_errors
    found = {
        "Vm": curve.parameters["capacity"],
        "K": curve.parameters["half"],
        "se_Vm": u["capacity"],
        "se_K": u["half"],
        "sigma": curve.residual_sd,
        "rss": curve.residual_sum,
        "corr": curve.covariance[1, 2] / (u["capacity"] * u["half"]),
    }
    for what, (value, tolerance) in data["printed"].items():
        assert found[what] == pytest.approx(value, abs=tolerance), what


@pytest.mark.parametrize("weight", ["unweighted", "1/y", "1/y²", "1/x"])
def test_puromycin_fit(weight: str, agree: Agree) -> None:
    data = case("puromycin_treated")
    sd = {
        "unweighted": np.ones(len(data["y"])),
        "1/y": np.sqrt(data["y"]),
        "1/y²": np.array(data["y"]),
        "1/x": np.sqrt(data["x"]),
    }[weight]
    curve = calib.fit(data["x"], data["y"], model="saturation", fixed={"offset": 0.0}, relative_sd=sd)
    expected = data["fits"][weight]
    p, u = curve.parameters, curve.standard_errors
    agree("puromycin", "parameters", [p["capacity"], p["half"]], [expected["capacity"], expected["half"]], 8)
    agree("puromycin", "standard errors", [u["capacity"], u["half"]], expected["se"], 8)
    agree("puromycin", "residual SD", curve.residual_sd, expected["sigma"], 10)


def test_puromycin_inverse_predictions(agree: Agree) -> None:
    data = case("puromycin_treated")
    curve = calib.fit(data["x"], data["y"], model="saturation", fixed={"offset": 0.0})
    assert_inverse(curve, data["inverse"], "puromycin", agree)


@pytest.mark.parametrize("direction", ["rising", "falling"])
def test_noiseless_sigmoid_is_recovered(direction: str, agree: Agree) -> None:
    data = case("noiseless_sigmoid")
    truth = data[direction]
    curve = calib.fit(data["x"], truth["y"], model="4PL")
    expected = [truth["zero"], truth["infinite"], data["midpoint"], data["slope"]]
    agree("noiseless_sigmoid", "parameters", curve.values, expected, 8)
    responses = [0.6, 1.1, 1.6] if direction == "rising" else [1.6, 1.1, 0.6]
    read = curve.invert(responses).value
    agree("noiseless_sigmoid", "x0", read, data["response of 0.6, 1.1, 1.6 rising"], 9)
    beyond = curve.invert([y for y in data["no concentration for"] if y not in (0.1, 2.1)])
    assert np.isnan(beyond.value).all()
