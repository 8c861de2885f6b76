"""Fixed and bounded parameters, solvers, known and estimated scale."""

from __future__ import annotations

import numpy as np
import pytest
from made_standards import RISING, assay_standards, codes

import calib


def test_a_fixed_parameter_stays_and_is_certain() -> None:
    x, y = assay_standards()
    curve = calib.fit(x, y, fixed={"zero": 0.05})
    assert curve.parameters["zero"] == 0.05
    assert curve.standard_errors["zero"] == 0.0
    assert curve.fixed == {"zero": 0.05}
    assert curve.degrees_of_freedom == 16 - 3
    assert not curve.covariance[0].any()
    assert not curve.covariance[:, 0].any()


def test_fixing_a_parameter_at_its_estimate_leaves_the_others() -> None:
    x, y = assay_standards()
    free = calib.fit(x, y)
    held = calib.fit(x, y, fixed={"slope": free.parameters["slope"]})
    np.testing.assert_allclose(held.values, free.values, rtol=1e-7)
    assert all(held.standard_errors[n] <= free.standard_errors[n] for n in free.parameters)


def test_bounds_that_do_not_bind_change_nothing() -> None:
    x, y = assay_standards()
    free = calib.fit(x, y)
    bounded = calib.fit(x, y, bounds={"infinite": (1.0, 10.0), "slope": (0.5, 3.0)})
    np.testing.assert_allclose(bounded.values, free.values, rtol=1e-9)
    assert "at-bound" not in codes(bounded)


def test_a_binding_bound_is_reported() -> None:
    x, y = assay_standards()
    curve = calib.fit(x, y, bounds={"infinite": (0.0, 2.2)})
    assert curve.parameters["infinite"] <= 2.2
    assert curve.parameters["infinite"] == pytest.approx(2.2, rel=1e-5)
    message = next(f.message for f in curve.findings if f.code == "at-bound")
    assert "infinite" in message
    assert "2.2" in message


def test_a_start_from_afar_ends_where_the_own_start_does() -> None:
    x, y = assay_standards()
    own = calib.fit(x, y)
    far = calib.fit(x, y, start={"zero": 1.0, "infinite": 1.5, "midpoint": 3.0, "slope": 0.4})
    np.testing.assert_allclose(far.values, own.values, rtol=1e-7)


def test_a_partial_start_is_completed_from_the_data() -> None:
    x, y = assay_standards()
    np.testing.assert_allclose(
        calib.fit(x, y, start={"slope": 2.0}).values, calib.fit(x, y).values, rtol=1e-7
    )


@pytest.mark.parametrize(("model", "noise"), [("4PL", "uniform"), ("line", "relative")])
def test_simplex_agrees_with_least_squares(model: str, noise: str) -> None:
    x, y = assay_standards()
    direct = calib.fit(x, y, model=model, noise=noise)
    simplex = calib.fit(x, y, model=model, noise=noise, solver="simplex")
    assert simplex.solver == "simplex"
    assert simplex.residual_sum == pytest.approx(direct.residual_sum, rel=1e-8)
    np.testing.assert_allclose(simplex.values, direct.values, rtol=1e-4)


def test_known_uncertainties_are_absolute() -> None:
    x, y = assay_standards()
    one, ten = calib.fit(x, y, u=np.full(16, 0.02)), calib.fit(x, y, u=np.full(16, 0.2))
    np.testing.assert_allclose(ten.values, one.values, rtol=1e-8)
    np.testing.assert_allclose(ten.covariance, 100.0 * one.covariance, rtol=1e-6)
    assert one.residual_sum == pytest.approx(100.0 * ten.residual_sum, rel=1e-9)
    assert np.isinf(one.coverage_freedom)
    assert one.scale == 1.0


def test_relative_standard_deviations_count_only_up_to_a_factor() -> None:
    x, y = assay_standards()
    sd = 0.01 + 0.05 * y
    one, ten = calib.fit(x, y, relative_sd=sd), calib.fit(x, y, relative_sd=10.0 * sd)
    np.testing.assert_allclose(ten.values, one.values, rtol=1e-8)
    np.testing.assert_allclose(ten.covariance, one.covariance, rtol=1e-6)
    assert ten.coverage_freedom == 12


def test_known_and_estimated_scale_differ_by_the_residual_sd() -> None:
    x, y = assay_standards()
    known = calib.fit(x, y, u=np.full(16, 0.02))
    estimated = calib.fit(x, y)
    factor = (estimated.residual_sd / 0.02) ** 2
    np.testing.assert_allclose(estimated.covariance, factor * known.covariance, rtol=1e-6)


def test_one_uncertainty_serves_all_readings() -> None:
    x, y = assay_standards()
    np.testing.assert_array_equal(
        calib.fit(x, y, u=0.02).covariance, calib.fit(x, y, u=np.full(16, 0.02)).covariance
    )


def test_a_curve_is_frozen() -> None:
    x, y = assay_standards()
    curve = calib.fit(x, y)
    with pytest.raises(AttributeError):
        curve.scale = 1.0  # type: ignore[misc]
    for array in (curve.values, curve.covariance, curve.standards.concentration, curve.standards.response):
        with pytest.raises(ValueError, match="read-only"):
            array[0] = 1.0
    x[0] = 99.0
    assert curve.standards.concentration[0] != 99.0


def test_the_fit_is_reproducible_to_the_bit() -> None:
    x, y = assay_standards(RISING, seed=3)
    np.testing.assert_array_equal(calib.fit(x, y).values, calib.fit(x, y).values)


def test_a_search_without_derivatives_takes_over_where_derivatives_lead_nowhere() -> None:
    """A gradient with the wrong sign sends least squares uphill; the sum is that of the right gradient."""
    x, y = assay_standards()
    names = ("offset", "capacity", "half")

    def saturation(x, offset, capacity, half):  # type: ignore[no-untyped-def]
        return offset + capacity * x / (half + x)

    def wrong(x, offset, capacity, half):  # type: ignore[no-untyped-def]
        share = x / (half + x)
        return np.stack([np.ones_like(x), -share, capacity * share / (half + x)], axis=-1)

    start = {"offset": 0.1, "capacity": 1.0, "half": 30.0}
    misled = calib.fit(x, y, calib.custom_model("misled", names, saturation, wrong), start=start)
    right = calib.fit(x, y, calib.custom_model("right", names, saturation), start=start)
    assert "simplex-needed" in codes(misled)
    assert "simplex-needed" not in codes(right)
    assert misled.residual_sum == pytest.approx(right.residual_sum, rel=1e-6)
