"""The index of each end of a curve, against its formula and against the states it stands beside."""

import numpy as np
import pytest
from made_curves import assay_curve, line_curve

from calib.curves.quantiles import two_sided
from calib.quantification.asymptotes import asymptote_index


@pytest.mark.parametrize("m", [1, 3])
def test_it_is_the_half_width_at_the_end_over_the_distance_from_it(m):
    """By hand for the 4PL: the gradient at an end picks out its own parameter."""
    curve = assay_curve()
    y = np.array([0.3, 1.2, 2.3])
    found = asymptote_index(curve, y, m)
    q = float(two_sided(12, 0.95))
    for index, name, k in ((found.zero, "zero", 0), (found.infinite, "infinite", 1)):
        half = q * np.sqrt(curve.scale**2 / m + curve.covariance[k, k])
        np.testing.assert_allclose(index, half / np.abs(curve.parameters[name] - y), rtol=1e-12)


def test_from_one_on_an_end_is_within_the_band():
    """h >= 1 says that the end itself agrees with the response, so its side of the interval is open."""
    curve = assay_curve()
    y = np.linspace(2.0, 2.49, 50)
    found, quantity = asymptote_index(curve, y).infinite, curve.invert(y)
    np.testing.assert_array_equal(found >= 1.0, np.isinf(quantity.upper))


def test_a_line_has_no_ends():
    found = asymptote_index(line_curve(), [10.0])
    assert np.isnan(found.zero).all()
    assert np.isnan(found.infinite).all()
