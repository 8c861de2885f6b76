"""Straight lines of guides, standards and textbooks; the source stands at the head of each case."""

from __future__ import annotations

import numpy as np
import pytest
from published import Agree, case

import calib
from calib import Curve


def line(name: str, **settings: object) -> Curve:
    data = case(name)
    return calib.fit(data["x"], data["y"], model="line", **settings)


def reported(curve: Curve) -> dict[str, float]:
    """What a straight-line report prints, under the names the cases use."""
    (variance_a, covariance), (_, variance_b) = curve.covariance
    return {
        **curve.parameters,
        "u intercept": np.sqrt(variance_a),
        "u slope": np.sqrt(variance_b),
        "variance intercept": variance_a,
        "variance slope": variance_b,
        "covariance": covariance,
        "correlation": covariance / np.sqrt(variance_a * variance_b),
        "residual sd": curve.residual_sd,
        "residual sum": curve.residual_sum,
        "fitted": curve.predict(curve.standards.concentration),
    }


def assert_as_printed(found: dict[str, float], printed: dict[str, list[float]]) -> None:
    for what, (value, tolerance) in printed.items():
        # 1e-12: a printed half unit is not exact in binary.
        np.testing.assert_allclose(
            found[what], value, rtol=0, atol=tolerance * (1 + 1e-9) + 1e-12, err_msg=what
        )


def test_cadmium_of_quam_a5(agree: Agree) -> None:
    data = case("quam_a5_cadmium")
    curve = line("quam_a5_cadmium")
    quantity = curve.invert([np.mean(data["unknown"])], replicates=2, interval="delta")
    found = reported(curve) | {"x0": quantity.value[0], "u x0": quantity.u[0]}
    assert_as_printed(found, data["printed"])
    derived = data["derived"]
    agree("quam_a5_cadmium", "x0", quantity.value, derived["x0"], 12)
    agree("quam_a5_cadmium", "u", quantity.u, derived["u x0"], 12)
    agree("quam_a5_cadmium", "delta", [quantity.lower[0], quantity.upper[0]], derived["delta"], 12)


def test_thermometer_of_gum_h3() -> None:
    data = case("gum_h3_thermometer")
    x = np.array(data["x"]) - data["origin"]
    curve = calib.fit(x, data["y"], model="line")
    at_30 = 30.0 - data["origin"]
    found = reported(curve) | {
        "y at 30": curve.predict(at_30),
        "u y at 30": np.sqrt(curve.fit_variance(at_30)),
    }
    assert_as_printed(found, data["printed"])


def test_iso_28037_with_known_uncertainties() -> None:
    data = case("iso28037_known_u")
    curve = line("iso28037_known_u", u=data["u"])
    quantity = curve.invert([data["y0"]])
    x, u_x = data["x forward"], data["u x forward"]
    u_forward = np.sqrt(curve.fit_variance(x) + (curve.parameters["slope"] * u_x) ** 2)
    found = reported(curve) | {
        "x0": quantity.value[0],
        "u x0": quantity.u[0],
        "y forward": curve.predict(x),
        "u y forward": u_forward,
    }
    assert_as_printed(found, data["printed"])
    assert quantity.state == ("ok",)
    assert quantity.k[0] == pytest.approx(1.959964, abs=1e-6)  # normal quantile: the scale is known


def test_iso_28037_annex_e_with_unknown_uncertainties() -> None:
    data = case("iso28037_annex_e")
    curve = line("iso28037_annex_e")
    quantity = curve.invert([data["y0"]])
    assert_as_printed(reported(curve) | {"x0": quantity.value[0], "u x0": quantity.u[0]}, data["printed"])


def test_iso_28037_uncertainty_in_both_variables(agree: Agree) -> None:
    """Twelve readings, six of x and six of y, on a curve whose parameters include the true x."""
    data = case("iso28037_both_uncertain")
    names = ("intercept", "slope", *(f"true_{i}" for i in range(6)))

    def readings(index: np.ndarray, a: complex, b: complex, *truth: complex) -> np.ndarray:
        true_x = np.array(truth)[np.asarray(index).astype(int) % 6]
        return np.where(index < 6, true_x, a + b * true_x)

    curve = calib.fit(
        np.arange(12),
        [*data["x"], *data["y"]],
        model=calib.custom_model("both-uncertain", names, readings),
        u=[*data["u_x"], *data["u_y"]],
        start=dict(zip(names, [0.0, 2.0, *data["x"]], strict=True)),
    )
    found = {**curve.parameters, "residual sum": curve.residual_sum}
    assert_as_printed(found, data["printed"])
    for what in ("intercept", "slope", "residual sum"):
        agree("iso28037_both_uncertain", what, found[what], data["derived"][what], 10)
    assert curve.standard_errors["intercept"] == pytest.approx(data["printed u"]["u intercept"], rel=0.01)
    assert curve.standard_errors["slope"] == pytest.approx(data["printed u"]["u slope"], rel=0.01)


def test_harvey_line_and_unknown(agree: Agree) -> None:
    data = case("harvey_line")
    curve = line("harvey_line")
    quantity = curve.invert([np.mean(data["unknown"])], replicates=3, interval="delta")
    found = reported(curve) | {
        "x0": quantity.value[0],
        "u x0": quantity.u[0],
        "half width": quantity.expanded[0],
    }
    assert_as_printed(found, data["printed"])
    for what in ("slope", "intercept", "residual sd", "x0", "u x0"):
        agree("harvey_line", what, found[what], data["derived"][what], 11)


def test_harvey_weighted_line(agree: Agree) -> None:
    data = case("harvey_weighted_line")
    curve = line("harvey_weighted_line", relative_sd=data["s_y"])
    agree("harvey_weighted_line", "slope", curve.parameters["slope"], data["derived"]["slope"], 11)
    agree(
        "harvey_weighted_line", "intercept", curve.parameters["intercept"], data["derived"]["intercept"], 11
    )
    # The book's own figures are rounding artefacts: near, and not to be reproduced.
    assert curve.parameters["slope"] == pytest.approx(data["printed"]["slope"], rel=0.003)
    assert abs(curve.parameters["intercept"] - data["printed"]["intercept"]) > 0.02


def test_miller_fluorescein(agree: Agree) -> None:
    data = case("miller_fluorescein")
    curve = line("miller_fluorescein")
    single = curve.invert(data["unknown"])
    assert_as_printed(reported(curve) | {"x0": single.value, "u x0": single.u}, data["printed"])
    assert np.sqrt(curve.r_squared) == pytest.approx(data["r"][0], abs=data["r"][1])
    four = curve.invert(data["unknown"], replicates=4)
    agree("miller_fluorescein", "u, 1 reading", single.u, data["derived"]["u x0, 1 reading"], 12)
    agree("miller_fluorescein", "u, 4 readings", four.u, data["derived"]["u x0, 4 readings"], 12)


def test_miller_weighted_line(agree: Agree) -> None:
    data = case("miller_weighted_line")
    curve = line("miller_weighted_line", u=data["s_y"])
    assert_as_printed(reported(curve) | {"x0": curve.invert(data["unknown"]).value}, data["printed"])
    derived = data["derived"]
    agree("miller_weighted_line", "slope", curve.parameters["slope"], derived["slope"], 12)
    agree("miller_weighted_line", "intercept", curve.parameters["intercept"], derived["intercept"], 12)
    agree("miller_weighted_line", "chi squared", curve.residual_sum, derived["chi squared"], 11)


def test_miller_line_without_weights() -> None:
    data = case("miller_weighted_line")
    curve = line("miller_weighted_line")
    quantity = curve.invert(data["unknown"], interval="delta")
    found = reported(curve) | {"x0": quantity.value, "half width": quantity.expanded}
    assert_as_printed(found, data["printed unweighted"])


def test_bevington_line() -> None:
    assert_as_printed(reported(line("bevington_line")), case("bevington_line")["printed"])


def test_pearson_line_with_weights_over_three_decades() -> None:
    data = case("pearson_weighted_line")
    curve = line("pearson_weighted_line", u=1.0 / np.sqrt(data["weight_y"]))
    assert_as_printed(reported(curve), data["printed"])
