"""Further uncertainty components and effective degrees of freedom."""

from __future__ import annotations

import numpy as np
import pytest
from made_curves import assay_curve

from calib import Component
from calib.curves.quantiles import student_quantile, two_sided
from calib.errors import InputError
from calib.quantification.budget import effective_freedom_of


def test_effective_freedom_of_gum_g4() -> None:
    """JCGM 100:2008, G.4.1, example: 0.25 % (9), 0.57 % (4), 0.82 % (14) give 19.0 (from memory)."""
    components = [Component("second", 0.0057, 4), Component("third", 0.0082, 14)]
    found = effective_freedom_of([Component("first", 0.0025, 9), *components])
    assert found == pytest.approx(19.0, abs=0.05)
    # The example goes on to t_95(19) = 2.09.
    assert two_sided(19, 0.95) == pytest.approx(2.09, abs=0.005)


def test_effective_freedom_of_gum_h1() -> None:
    """JCGM 100:2008, H.1.6: 25 (18), 9.7 (25.6), 2.9 (50), 16.6 nm (2) give 16.7 (from memory).

    The document works with u_c = 32 nm; its parts give 31.6 nm, hence the wider tolerance.
    """
    rest = [Component("d", 9.7e-3, 25.6), Component("alpha", 2.9e-3, 50), Component("theta", 16.6e-3, 2)]
    found = effective_freedom_of([Component("standard", 25e-3, 18), *rest])
    assert found == pytest.approx(16.7, rel=0.05)


def test_components_enter_in_quadrature_with_their_freedom() -> None:
    curve = assay_curve()
    plain = curve.invert([1.2])
    full = curve.invert([1.2], components=[Component("standard", 0.04, 6.0), Component("flask", 0.03)])
    x, own = plain.value[0], plain.u[0]
    u = np.sqrt(own**2 + (0.05 * x) ** 2)
    nu = u**4 / (own**4 / 12 + (0.04 * x) ** 4 / 6)
    assert full.value[0] == x
    assert full.u[0] == pytest.approx(u, rel=1e-12)
    assert full.curve_u[0] == pytest.approx(own, rel=1e-12)
    assert full.degrees_of_freedom[0] == pytest.approx(nu, rel=1e-12)
    assert full.lower[0] < plain.lower[0]
    assert full.upper[0] > plain.upper[0]


def test_a_component_of_nothing_changes_nothing() -> None:
    curve = assay_curve()
    plain, full = curve.invert([1.2]), curve.invert([1.2], components=[Component("none", 0.0)])
    assert full.degrees_of_freedom[0] == pytest.approx(12.0)
    np.testing.assert_allclose(full.lower, plain.lower, rtol=1e-12)
    np.testing.assert_allclose(full.upper, plain.upper, rtol=1e-12)


@pytest.mark.parametrize(
    ("relative_u", "freedom", "message"),
    [
        (-0.1, 5.0, "'flask': relative_u = -0.1"),
        (np.nan, 5.0, "relative_u"),
        (0.1, 0.0, "degrees_of_freedom"),
    ],
)
def test_a_component_that_cannot_be(relative_u: float, freedom: float, message: str) -> None:
    with pytest.raises(InputError, match=message):
        Component("flask", relative_u, freedom)


@pytest.mark.parametrize(
    ("freedom", "printed"), [(1, 12.71), (4, 2.776), (10, 2.228), (30, 2.042), (np.inf, 1.960)]
)
def test_printed_quantiles_of_student(freedom: float, printed: float) -> None:
    """t(0.975) of any printed table (from memory)."""
    assert student_quantile(freedom, 0.975) == pytest.approx(printed, abs=0.005 if freedom == 1 else 5e-4)


def test_without_degrees_of_freedom_the_quantile_is_infinite() -> None:
    assert np.isposinf(student_quantile(0, 0.975))
