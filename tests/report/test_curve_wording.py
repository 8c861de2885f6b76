"""A curve in words: units, parameters, and what the residual SD counts."""

from dataclasses import replace

import numpy as np
import pytest

import calib
from calib.report import curve_wording

X = [0.5, 1.0, 2.0, 4.0, 8.0, 16.0]
Y = [5.2, 9.8, 20.4, 39.6, 81.0, 158.0]


@pytest.mark.parametrize(
    ("unit_of", "expected"),
    [
        ("response", "nA"),
        ("concentration", "mg/L"),
        ("response/concentration", "nA/(mg/L)"),
        ("1/concentration", "1/(mg/L)"),
        ("1", "1"),
    ],
)
def test_unit_of_a_parameter(unit_of: str, expected: str) -> None:
    assert curve_wording.unit_words(unit_of, "mg/L", "nA") == expected


def test_a_response_that_is_a_ratio_itself() -> None:
    assert curve_wording.unit_words("response/concentration", "mg/L", "1/d") == "(1/d)/(mg/L)"


def test_parameters_with_their_uncertainty_fixed_and_undetermined() -> None:
    curve = calib.fit(X, Y, model="line", fixed={"intercept": 0.0})
    held, slope = curve_wording.parameter_rows(curve, "mg/L", "nA")
    assert held[2:4] == ("0", "held")
    assert len(slope[3].lstrip("0.")) == 2
    loose = replace(curve, covariance=np.full_like(curve.covariance, np.nan))
    assert curve_wording.parameter_rows(loose, "mg/L", "nA")[1][3] == "not determined"


@pytest.mark.parametrize(
    ("noise", "words"),
    [
        ("uniform", "nA"),
        ("relative", "% of the response"),
        (calib.assumed_noise(of="response", exponent=1.0), "times response^0.5 (response in nA)"),
        (
            calib.assumed_noise(of="concentration", exponent=2.0),
            "nA, times concentration^1 (concentration in mg/L)",
        ),
    ],
)
def test_residual_sd_says_what_it_counts(noise: object, words: str) -> None:
    curve = calib.fit(X, Y, model="line", noise=noise)
    text = curve_wording.residual_sd_text(curve, "mg/L", "nA")
    assert text.endswith(words)
    figure = float(text.split()[0].rstrip(","))
    assert figure == pytest.approx(curve.residual_sd * (100 if "%" in words else 1), rel=5e-3)


def test_residual_sd_against_known_uncertainties() -> None:
    curve = calib.fit(X, Y, model="line", u=[0.5] * len(X))
    assert curve_wording.residual_sd_text(curve, "mg/L", "nA").endswith(
        "times the known standard uncertainties"
    )
