"""The between-run component and the curve of another day, against variance components by hand and simulation."""

import numpy as np
import pytest
from simulated_budget import coverage_of_another_day, coverage_of_budget

import calib
from calib.quantification.between_run import CheckedRun, between_runs, curve_scatter
from calib.quantification.budget import Component
from calib.quantification.preparation import carried_into_curve


def runs(values, variance=0.0, label="Q"):
    return [CheckedRun((label,), np.array([v]), np.array([[variance]])) for v in values]


def test_the_component_is_the_scatter_of_the_means_less_what_runs_explain():
    values = [0.02, -0.03, 0.05, -0.04, 0.01, 0.03, -0.04]
    found = between_runs(runs(values, 4e-4))
    assert found.spread == pytest.approx(np.std(values, ddof=1))
    assert found.relative_u == pytest.approx(np.sqrt(np.var(values, ddof=1) - 4e-4))
    assert found.degrees_of_freedom == 6


def test_nothing_is_left_where_the_runs_explain_it_all_but_its_doubt_stays():
    found = between_runs(runs([0.01, -0.01, 0.02, -0.02, 0.01, -0.01], 1e-2))
    assert (found.relative_u, found.degrees_of_freedom) == (0.0, 5)
    assert found.spread > 0


def test_a_bias_of_a_level_is_no_scatter_between_runs():
    """Every other run lacks the biased high level; about their own means nothing scatters."""
    both = [CheckedRun(("low", "high"), np.array([0.0, 0.1]), np.zeros((2, 2))) for _ in range(4)]
    low = [CheckedRun(("low",), np.array([0.0]), np.zeros((1, 1))) for _ in range(4)]
    assert between_runs([*both, *low]).spread == pytest.approx(0.0, abs=1e-15)


@pytest.mark.parametrize(("n", "there"), [(5, False), (6, True)])
def test_it_takes_six_runs(n, there):
    assert (between_runs(runs(np.linspace(-0.05, 0.05, n))) is not None) is there


def test_its_doubt_enters_welch_and_satterthwaite_with_the_scatter_of_the_means():
    """nu = u⁴/(s_means⁴/(N−1) + u_w⁴/ν), by hand (JCGM 100:2008, G.4)."""
    x = np.linspace(0.0, 10.0, 12)
    curve = calib.fit(x, 1.0 + 2.0 * x + 0.05 * np.cos(40 * x), model="line")
    quantity = curve.invert([11.0], components=[Component("between runs", 0.03, 9.0, spread=0.035)])
    value, own = quantity.value[0], quantity.curve_u[0]
    u4 = (own**2 + (0.03 * value) ** 2) ** 2
    nu = u4 / (own**4 / 10 + (0.035 * value) ** 4 / 9)
    assert quantity.degrees_of_freedom[0] == pytest.approx(nu, rel=1e-12)
    assert quantity.u[0] == pytest.approx(u4**0.25)


def test_curves_scatter_by_twice_what_their_own_variance_leaves():
    """Lines through the origin: by hand var(slope) between runs less the mean own variance, times 2x²."""
    x = np.array([1.0, 2.0, 3.0, 4.0, 5.0, 6.0])
    slopes = [2.0, 2.1, 1.9, 2.05, 1.95, 2.0, 2.1]
    wiggle = 0.01 * np.cos(50 * x)
    curves = [calib.fit(x, s * x + wiggle, model="proportional") for s in slopes]
    scatter = curve_scatter(curves)
    fitted = [c.values[0] for c in curves]
    own = np.mean([c.covariance[0, 0] for c in curves])
    expected = 2 * (np.var(fitted, ddof=1) - own) * 9.0
    assert scatter.response_variance(curves[0], np.array([3.0]))[0] == pytest.approx(expected, rel=1e-9)
    assert scatter.parameter_covariance(curves[0])[0, 0] == pytest.approx(expected / 9.0, rel=1e-9)


def test_a_level_off_by_a_little_moves_the_curve_as_the_component_says():
    """Against a fit with one level changed: the first-order effect of 0.01 % of a level."""
    x = np.repeat([0.5, 1.0, 2.0, 4.0, 8.0, 16.0], 2)
    y = 0.1 + 2.0 * x / (3.0 + x) * (1.0 + 0.01 * np.cos(7 * np.arange(12)))
    curve = calib.fit(x, y, model="saturation")
    changed = calib.fit(np.where(x == 4.0, 4.0 * (1 + 1e-4), x), y, model="saturation")
    one = np.diag(np.zeros(12))
    one[np.ix_(x == 4.0, x == 4.0)] = 1e-8
    moved = changed.predict(3.0) - curve.predict(3.0)
    u = np.sqrt(carried_into_curve(curve, one).response_variance(curve, np.array([3.0]))[0])
    # Gauss–Newton leaves out the curvature times the residuals, which are 1 % here.
    assert u == pytest.approx(abs(moved), rel=0.05)


def test_a_common_deviation_of_all_levels_is_one_of_the_result():
    """Scale equivariance: all levels up by a factor put every result up by it (4PL, any noise)."""
    x = np.repeat([0.5, 1.0, 2.0, 4.0, 8.0, 16.0, 32.0], 2)
    y = 2.5 - 2.4 / (1 + (x / 5.0) ** 1.2) + 0.01 * np.cos(9 * np.arange(14))
    curve = calib.fit(x, y, model="4PL")
    u = np.sqrt(
        carried_into_curve(curve, 1e-4 * np.ones((14, 14))).response_variance(curve, np.array([3.0]))[0]
    )
    relative = u / abs(3.0 * curve.response_model.slope(np.array(3.0), curve.values))
    assert relative == pytest.approx(0.01, rel=0.03)


def test_combined_intervals_cover_with_the_component_and_not_without_it():
    """10 past runs, 95 % claimed; 150 trials, so 2.5 standard errors of coverage are 4.4 points."""
    covered, without = coverage_of_budget(s_b=0.06, past=10, trials=150, seed=20260301)
    assert 0.935 - 0.044 <= covered <= 1.0
    assert without < 0.85


def test_the_curve_of_another_day_covers_with_its_component_and_not_without_it():
    """10 past runs, parameters scattering between runs; 120 trials: 2.5 standard errors are 5.0 points."""
    covered, without = coverage_of_another_day(past=10, trials=120, seed=20260302)
    assert 0.94 - 0.05 <= covered <= 1.0
    assert without < 0.80
