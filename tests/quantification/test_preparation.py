"""Prepared solutions: value, combined uncertainty, and what they share with each other."""

import numpy as np
import pytest

from calib.errors import InputError
from calib.quantification.preparation import Volume, certified, diluted, own_covariance, shared_parts

STOCK = certified("A-1", 1000.0, 2.0)
WORKING = diluted(STOCK, "W-1", Volume(1.0, 0.006), Volume(100.0, 0.05))


def test_a_standard_weighed_in_and_made_up():
    """EURACHEM/CITAC Guide CG 4, Quantifying Uncertainty (2012), example A1: cadmium, 1002.7 mg/L, u = 0.9.

    From memory: purity 0.9999 with u 0.000058, mass 100.28 mg with u 0.05, volume 100 mL with u 0.07.
    """
    solution = diluted(certified("metal", 0.9999, 0.000058), "Cd", Volume(0.10028, 5e-5), Volume(100.0, 0.07))
    assert 1e6 * solution.value == pytest.approx(1002.7, abs=0.05)
    assert 1e6 * solution.u == pytest.approx(0.9, abs=0.05)


def test_relative_uncertainties_add_in_quadrature_along_the_tree():
    assert WORKING.value == pytest.approx(10.0, rel=1e-12)
    assert WORKING.relative_u == pytest.approx(np.sqrt(0.002**2 + 0.006**2 + 0.0005**2), rel=1e-12)


def test_degrees_of_freedom_come_from_the_certificate_alone():
    """Welch and Satterthwaite by hand: volumes are known, so nu = nu_c·(u/u_c)^4."""
    few = diluted(certified("B", 10.0, 0.1, 4.0), "W", Volume(1.0, 0.01), Volume(10.0, 0.01))
    assert few.degrees_of_freedom == pytest.approx(4.0 * (few.relative_u / 0.01) ** 4, rel=1e-12)
    assert WORKING.degrees_of_freedom == np.inf


def test_levels_from_one_stock_share_its_certificate_and_nothing_else():
    levels = [diluted(STOCK, f"L{n}", Volume(n, 0.01 * n), Volume(100.0, 0.0)) for n in (1.0, 2.0, 5.0)]
    assert [p.name for p in shared_parts(levels)] == ["certified value of A-1"]
    np.testing.assert_allclose(own_covariance(levels), 1e-4 * np.eye(3), rtol=1e-12)


def test_a_serial_dilution_passes_its_volumes_on():
    """By hand: level k carries the volumes of all steps before it, which correlate it with them."""
    step = [diluted(STOCK, "L1", Volume(1.0, 0.01), Volume(2.0, 0.0))]
    step += [diluted(step[0], "L2", Volume(1.0, 0.02), Volume(2.0, 0.0))]
    assert [p.name for p in shared_parts(step)] == [p.name for p in step[0].parts]
    stock = diluted(STOCK, "L0", Volume(1.0, 0.005), Volume(2.0, 0.0))
    covariance = own_covariance([stock, *step])
    expected = [[0.005**2, 0.0, 0.0], [0.0, 0.01**2, 0.01**2], [0.0, 0.01**2, 0.01**2 + 0.02**2]]
    np.testing.assert_allclose(covariance, expected, rtol=1e-12)


def test_replicates_of_one_solution_are_one_solution():
    own = own_covariance([WORKING, WORKING, STOCK])
    assert own[0, 1] == own[0, 0] == pytest.approx(0.006**2 + 0.0005**2)
    assert own[0, 2] == own[2, 2] == 0.0


@pytest.mark.parametrize(
    ("taken", "u", "words"),
    [
        (0.0, 0.0, "give one above 0"),
        (float("nan"), 0.1, "give one above 0"),
        (1.0, -0.1, "at least 0 and below the volume"),
        (1.0, 1.0, "at least 0 and below the volume"),
        (11.0, 0.1, "11 taken cannot be made up to 10; exchange them"),
    ],
)
def test_a_volume_that_cannot_be_is_refused(taken, u, words):
    with pytest.raises(InputError, match=words):
        diluted(STOCK, "W", Volume(taken, u), Volume(10.0, 0.1))
