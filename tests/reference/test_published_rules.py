"""Printed figures of acceptance rules, through the criteria that judge a run."""

import numpy as np
import pytest
from published import case
from scipy.special import fdtri

from calib.acceptance import Evidence, JudgedStandard, Limit, criteria_from, judge
from calib.acceptance.shape_criteria import cochran_p


def answer(key, x, y, limit, **changes):
    standards = tuple(
        JudgedStandard(f"S{n}", "standard", a, b, a, 0.0, False, False, key=n)
        for n, (a, b) in enumerate(zip(x, y, strict=True))
    )
    facts = {
        "standards": standards,
        "checks": (),
        "blanks": (),
        "converged": True,
        "findings": (),
        "residual_sd": 1.0,
        "free_parameters": 2,
        "r_squared": 1.0,
        "concentration_unit": "1",
        "model": "line",
    }
    limits = {"relative_error": Limit(1.0, "made up", "method"), key: Limit(limit, "made up", "method")}
    verdict = judge(Evidence(**(facts | changes)), criteria_from(limits))
    return next(r for r in verdict.criteria if r.id == key)


def test_the_load_cell_is_curved():
    """Mandel (1964) on NIST StRD Pontius: F is the certified curvature over its standard deviation, squared."""
    data = case("strd_linear_pontius")
    found = answer("mandel_linearity", data["x"], data["y"], 0.01)
    printed = float(found.detail.split("PG = ")[1].split()[0])
    assert printed == pytest.approx(case("mandel_load_cell")["printed"]["F"][0], rel=2e-5)
    assert not found.passed


# ISO 5725-2:1994, Table 4 (from memory): critical values of Cochran's test for k groups of n readings.
COCHRAN = {
    (3, 2): (0.967, 0.993),
    (3, 3): (0.871, 0.942),
    (5, 2): (0.841, 0.928),
    (5, 3): (0.684, 0.788),
    (5, 4): (0.598, 0.696),
    (5, 5): (0.544, 0.633),
    (10, 2): (0.602, 0.718),
    (10, 3): (0.445, 0.536),
}


@pytest.mark.parametrize(("groups", "readings"), COCHRAN)
@pytest.mark.parametrize(("column", "alpha"), [(0, 0.05), (1, 0.01)])
def test_cochran_critical_values(groups, readings, column, alpha):
    nu = readings - 1
    f = fdtri(nu, (groups - 1) * nu, 1 - alpha / groups)
    critical = 1 / (1 + (groups - 1) / f)
    assert critical == pytest.approx(COCHRAN[groups, readings][column], abs=1.1e-3)
    assert cochran_p(critical, groups, nu) == pytest.approx(alpha, rel=1e-9)


@pytest.mark.parametrize(("share", "passed"), [(0.601, True), (0.603, False)])
def test_one_level_that_scatters_is_found_at_the_printed_limit(share, passed):
    """Ten levels in duplicate, 5 %: C = 0.602."""
    x = np.repeat(np.arange(1.0, 11.0), 2)
    others = (1 - share) / 9
    half = np.sqrt(np.array([share] + [others] * 9) / 2)
    y = x + np.repeat(half, 2) * np.tile([1.0, -1.0], 10)
    assert answer("variance_of_one_level", x, y, 0.05).passed is passed


def test_levels_with_unequal_replicates_are_not_tested():
    assert answer("variance_of_one_level", [1, 1, 2], [1.0, 2.0, 3.0], 0.05).observed is None
