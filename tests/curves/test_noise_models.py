"""Variance functions: what is minimised, what is estimated, what is written down."""

from __future__ import annotations

import numpy as np
import pytest
from made_standards import LEVELS, RISING, assay_standards, codes
from scipy.optimize import minimize_scalar

import calib
from calib.curves.noise import AdditiveRelativeNoise, NoiseModel, PowerOfMeanNoise, noise_from_dict, of_run
from calib.curves.variance_function import Scatter, estimate_variance_functions, pseudo_likelihood
from calib.errors import InputError, MethodError
from calib.models import response_model


@pytest.mark.parametrize("exponent", [1.0, 2.0])
def test_weights_at_the_fitted_means_are_a_fixed_point(exponent: float) -> None:
    """J'W(r) = 0 with W at the fit itself, and cov = s² (J'WJ)⁻¹ (Carroll and Ruppert 1988, ch. 2)."""
    x, y = assay_standards()
    curve = calib.fit(x, y, noise=calib.assumed_noise("response", exponent))
    mean = curve.predict(x)
    w = np.abs(mean) ** -exponent
    j = curve.response_model.gradient(x, curve.values)
    r = y - mean
    normal = j.T @ (w * r)
    assert (np.abs(normal) <= 1e-8 * np.abs(j.T * w) @ np.abs(r)).all()
    s2 = np.sum(w * r**2) / 12
    np.testing.assert_allclose(curve.covariance, s2 * np.linalg.inv((j.T * w) @ j), rtol=1e-7)
    assert curve.residual_sd**2 == pytest.approx(s2, rel=1e-9)


def test_relative_noise_is_the_square_of_the_fitted_mean() -> None:
    x, y = assay_standards()
    relative = calib.fit(x, y, noise="relative")
    np.testing.assert_array_equal(
        relative.values, calib.fit(x, y, noise=calib.assumed_noise("response", 2.0)).values
    )


def test_noise_of_the_concentration_is_plain_weighting() -> None:
    x, y = assay_standards()
    legacy = calib.fit(x, y, noise=calib.assumed_noise("concentration", 2.0))
    weighted = calib.fit(x, y, relative_sd=x)
    np.testing.assert_allclose(legacy.values, weighted.values, rtol=1e-8)
    np.testing.assert_allclose(legacy.covariance, weighted.covariance, rtol=1e-6)


def many_readings(sd: object, seed: int = 11) -> tuple[np.ndarray, np.ndarray]:
    x = np.repeat(LEVELS, 60)
    mean = response_model("4PL").response(x, RISING)
    return x, mean + np.random.default_rng(seed).normal(size=x.size) * sd(mean)  # type: ignore[operator]


def test_the_power_of_the_mean_is_found_with_many_readings() -> None:
    """480 readings with sd = 0.04·mean^0.8; the standard deviation of theta is then about 0.03."""
    curve = calib.fit(*many_readings(lambda mean: 0.04 * mean**0.8), noise="power-of-mean")
    assert curve.noise.exponent == pytest.approx(1.6, abs=0.2)
    assert curve.scale == pytest.approx(0.04, rel=0.1)


def test_the_constant_and_relative_parts_are_found_with_many_readings() -> None:
    """sd² = 0.008² + (0.04·mean)², so that both parts are equal at response 0.2."""
    curve = calib.fit(*many_readings(lambda mean: np.hypot(0.008, 0.04 * mean)), noise="additive-relative")
    assert curve.noise.ratio == pytest.approx(0.2, rel=0.3)
    assert curve.scale == pytest.approx(0.04, rel=0.1)


@pytest.mark.parametrize("family", ["power-of-mean", "additive-relative"])
def test_the_pseudo_likelihood_is_lowest_at_the_estimate(family: str) -> None:
    """The same minimum as a general scalar minimiser finds (scipy.optimize.minimize_scalar), run by run."""
    rng = np.random.default_rng(3)
    mean = np.geomspace(0.05, 2.5, 40)[:, None] * np.ones(5)
    residual = 0.04 * np.hypot(0.1, mean**0.8) * rng.standard_normal(mean.shape)
    scatter = Scatter(residual**2, np.ones((40, 1)), mean, np.full(mean.shape, 0.1))
    noise = estimate_variance_functions(family, scatter, "here")
    for i in range(5):

        def value(t: float, run: int = i) -> float:
            own = PowerOfMeanNoise(2 * t) if family == "power-of-mean" else AdditiveRelativeNoise(np.exp(t))
            return pseudo_likelihood(own, residual[:, run], mean[:, run], np.full(40, 0.1))

        bounds = (-0.2, 2.0) if family == "power-of-mean" else np.log(2.45 * np.array([1e-4, 1e3]))
        expected = minimize_scalar(value, bounds=bounds, method="bounded", options={"xatol": 1e-9})
        own = of_run(noise, i)
        found = own.exponent / 2 if family == "power-of-mean" else np.log(own.ratio)
        assert found == pytest.approx(expected.x, abs=1e-5)
        assert value(found) <= expected.fun + 1e-10


@pytest.mark.parametrize("family", ["power-of-mean", "additive-relative"])
def test_a_variance_function_from_one_run_says_so(family: str) -> None:
    curve = calib.fit(*assay_standards(), noise=family)
    assert curve.converged
    assert "variance-from-one-run" in codes(curve)
    assert "variance-from-one-run" not in codes(calib.fit(*assay_standards()))


@pytest.mark.parametrize(
    "settings",
    [
        {},
        {"noise": "relative"},
        {"noise": "power-of-mean"},
        {"noise": "additive-relative"},
        {"noise": calib.assumed_noise("concentration", 1.0)},
        {"u": 0.02},
        {"relative_sd": np.linspace(1.0, 2.0, 16)},
    ],
    ids=lambda s: "-".join(map(str, s)) or "uniform",
)
def test_a_noise_model_survives_the_record(settings: dict[str, object]) -> None:
    noise = calib.fit(*assay_standards(), **settings).noise  # type: ignore[arg-type]
    again = noise_from_dict(noise.to_dict())
    assert isinstance(again, NoiseModel)
    assert again == noise
    mean, x = np.array([0.1, 1.0, 2.0]), np.array([1.0, 50.0, 500.0])
    np.testing.assert_array_equal(again.variance(mean, x), noise.variance(mean, x))


def test_given_standard_deviations_hold_between_the_standards() -> None:
    x = np.array([1.0, 2.0, 3.0, 4.0])
    curve = calib.fit(x, 2.0 * x, model="line", u=[0.1, 0.2, 0.3, 0.4])
    np.testing.assert_allclose(np.sqrt(curve.reading_variance([0.0, 1.0, 2.5, 9.0])), [0.1, 0.1, 0.25, 0.4])


def test_a_zero_standard_stands_in_the_way_of_noise_of_the_concentration() -> None:
    with pytest.raises(InputError, match=r"concentration\[0\] is 0.*leave that standard out"):
        calib.fit([0, 1, 2, 4], [0.1, 1, 2, 4], model="line", noise=calib.assumed_noise("concentration"))


@pytest.mark.parametrize(
    ("of", "exponent", "message"),
    [("dilution", 2.0, "'response' or 'concentration'"), ("response", 9.0, "between -1 and 4")],
)
def test_noise_that_cannot_be_assumed(of: str, exponent: float, message: str) -> None:
    with pytest.raises(MethodError, match=message):
        calib.assumed_noise(of, exponent)


def test_an_unknown_record_of_noise_is_refused() -> None:
    with pytest.raises(MethodError, match="unknown noise model 'guessed'"):
        noise_from_dict({"kind": "guessed"})


def test_a_response_of_zero_gets_no_unbounded_weight() -> None:
    """The floor: 1e-3 of the range of the responses."""
    x = np.array([0.0, 0.0, 1.0, 2.0, 4.0, 8.0])
    curve = calib.fit(x, [0.0, 0.001, 1.02, 1.97, 4.1, 7.9], model="line", noise="relative")
    assert curve.converged
    assert np.isfinite(curve.covariance).all()
    assert curve.reading_variance(0.0) >= (curve.scale * 1e-3 * 7.9) ** 2 * 0.999
