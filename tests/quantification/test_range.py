"""Precision profile and working range against their definition."""

from __future__ import annotations

import numpy as np
import pytest
from made_curves import FALLING, RISING, assay_curve, line_curve

import calib
from calib.errors import InputError


@pytest.mark.parametrize("m", [1, 3])
@pytest.mark.parametrize("truth", [RISING, FALLING])
def test_precision_profile(truth: tuple[float, ...], m: int) -> None:
    curve = assay_curve(truth)
    x = np.geomspace(1.0, 900.0, 9)
    j = curve.response_model.gradient(x, curve.values)
    own = np.einsum("ni,ij,nj->n", j, curve.covariance, j)
    step = 1e-6 * x
    slope = (curve.predict(x + step) - curve.predict(x - step)) / (2 * step)
    expected = np.sqrt(curve.residual_sd**2 / m + own) / np.abs(x * slope)
    np.testing.assert_allclose(calib.precision_profile(curve, x, m), expected, rtol=1e-7)


@pytest.mark.parametrize("m", [1, 3])
@pytest.mark.parametrize("truth", [RISING, FALLING])
def test_working_range_ends_where_the_profile_meets_the_requirement(truth: tuple[float, ...], m: int) -> None:
    curve = assay_curve(truth, sd=0.06)
    found = calib.working_range(curve, 0.2, m)
    assert 0.457 < found.lowest < 100.0 < found.highest < 1000.0
    inside = np.geomspace(found.lowest, found.highest, 101)
    assert (calib.precision_profile(curve, inside, m) <= 0.2 * (1 + 1e-9)).all()
    # The ends are found on a grid of 1 % steps.
    outside = [found.lowest / 1.011, found.highest * 1.011]
    assert (calib.precision_profile(curve, outside, m) > 0.2).all()


def test_replicates_widen_the_working_range() -> None:
    curve = assay_curve(sd=0.06)
    one, three = calib.working_range(curve), calib.working_range(curve, replicates=3)
    assert three.lowest < one.lowest
    assert three.highest > one.highest


def test_the_working_range_stays_within_the_standards() -> None:
    found = calib.working_range(line_curve(sd=0.01))
    assert (found.lowest, found.highest) == (pytest.approx(1.0), pytest.approx(10.0))


def test_a_requirement_nothing_meets_gives_no_range() -> None:
    found = calib.working_range(assay_curve(), 1e-4)
    assert np.isnan(found.lowest)
    assert np.isnan(found.highest)


def test_a_requirement_of_nothing_is_refused() -> None:
    with pytest.raises(InputError, match="must be above 0"):
        calib.working_range(assay_curve(), 0.0)
