import math

import numpy as np
import pytest
from scipy import integrate, stats

from calib.drift import beyond, shewhart_limits
from calib.errors import InputError

# NIST/SEMATECH e-Handbook of Statistical Methods, 1.3.6.7.2, Student's t (from memory):
# probability, degrees of freedom, t.
PRINTED_T = [
    (0.975, 9, 2.262),
    (0.975, 19, 2.093),
    (0.975, 29, 2.045),
    (0.999, 19, 3.579),
    (0.999, 29, 3.396),
]


@pytest.mark.parametrize(("probability", "nu", "t"), PRINTED_T)
def test_half_width_from_the_printed_table_of_t(probability, nu, t):
    baseline = np.arange(nu + 1.0)
    limits = shewhart_limits(baseline, charts=1, alpha=2 * (1 - probability))
    n = nu + 1
    sd = math.sqrt(n * (n + 1) / 12)  # of 0, 1, ..., n-1
    assert limits.upper - limits.centre == pytest.approx(t * sd * math.sqrt(1 + 1 / n), rel=2.5e-4)
    assert limits.centre - limits.lower == pytest.approx(limits.upper - limits.centre)
    assert (limits.centre, limits.sd) == pytest.approx((nu / 2, sd))


@pytest.mark.parametrize(("n", "charts"), [(10, 1), (20, 3), (50, 6)])
def test_limits_against_another_route_to_t(n, charts):
    baseline = np.random.default_rng(8).normal(100, 3, n)
    limits = shewhart_limits(baseline, charts=charts)
    t = stats.t.isf(0.0027 / (2 * charts), n - 1)
    centre, sd = sum(baseline) / n, stats.tstd(baseline)
    assert limits.lower == pytest.approx(centre - t * sd * math.sqrt((n + 1) / n), rel=1e-12)
    assert limits.upper == pytest.approx(centre + t * sd * math.sqrt((n + 1) / n), rel=1e-12)


def test_one_chart_of_a_long_baseline_has_three_sigma_limits():
    # Shewhart's classical limit: probability 0.0027 outside three standard deviations.
    baseline = np.tile([-1.0, 1.0], 50_000)
    assert shewhart_limits(baseline, charts=1).upper == pytest.approx(3.0, rel=1e-4)


@pytest.mark.parametrize(
    ("count", "provisional"), [(9, None), (10, True), (19, True), (20, False), (50, False)]
)
def test_limits_are_none_then_provisional_then_final(count, provisional):
    limits = shewhart_limits(np.arange(float(count)))
    assert (None if limits is None else limits.provisional) is provisional


def test_runs_without_a_value_are_left_out_of_the_baseline():
    values = np.arange(12.0)
    assert shewhart_limits([*values, math.nan]) == shewhart_limits(values)


def test_a_value_on_a_limit_is_not_beyond_it_and_nan_neither():
    limits = shewhart_limits(np.arange(20.0))
    outside = [limits.lower, limits.upper, math.nan, limits.upper + 1e-9, limits.lower - 1e-9]
    assert beyond(outside, limits).tolist() == [False, False, False, True, True]


@pytest.mark.parametrize(("charts", "alpha"), [(0, 0.0027), (3, 0.0), (3, 1.0)])
def test_impossible_settings_are_refused(charts, alpha):
    with pytest.raises(InputError, match="control limits"):
        shewhart_limits(np.arange(20.0), charts, alpha)


# NIST/SEMATECH e-Handbook of Statistical Methods, 6.3.2.2, individuals control chart of a flow rate.
NIST_FLOW = (49.6, 47.6, 49.9, 51.3, 47.8, 51.2, 52.6, 52.4, 53.6, 52.1)
NIST_CENTRE, NIST_LOWER, NIST_UPPER = 50.81, 45.8159, 55.8041


def test_the_published_individuals_chart():
    # The handbook: centre +- 3 MR/1.128, sigma from moving ranges and taken as known. The centre is the
    # same; these limits carry the uncertainty of ten values and must be wider. Neither chart signals.
    limits = shewhart_limits(NIST_FLOW, charts=1)
    assert limits.centre == pytest.approx(NIST_CENTRE, abs=0.005)
    assert limits.lower < NIST_LOWER < NIST_UPPER < limits.upper
    assert limits.provisional
    assert not beyond(NIST_FLOW, limits).any()


def simulated_alarm_rate(n, charts=3, runs=100, histories=2000):
    """Share of stable histories with any false alarm, independent normal charts, fixed seed."""
    values = np.random.default_rng(20).normal(size=(histories, charts, n + runs))
    alarms = 0
    for history in values:
        limits = [shewhart_limits(chart[:n], charts) for chart in history]
        alarms += any(beyond(c[n:], lim).any() for c, lim in zip(history, limits, strict=True))
    return alarms / histories


def calculated_alarm_rate(n, charts=3, runs=100, alpha=0.0027):
    """The same probability by integrating over the mean and the standard deviation of the baseline."""
    k = stats.t.isf(alpha / (2 * charts), n - 1) * math.sqrt(1 + 1 / n)

    def quiet(sd, mean):
        inside = stats.norm.cdf(mean + k * sd) - stats.norm.cdf(mean - k * sd)
        density = stats.norm.pdf(mean, scale=1 / math.sqrt(n))
        return inside**runs * density * stats.chi2.pdf(sd**2 * (n - 1), n - 1) * 2 * sd * (n - 1)

    reach = 6 / math.sqrt(n)
    one_chart = integrate.dblquad(quiet, -reach, reach, 0.05, 2.5, epsabs=1e-5)[0]
    return 1 - one_chart**charts


@pytest.mark.parametrize("n", [20, 50])
def test_false_alarms_in_the_first_100_runs(n):
    rate, expected = simulated_alarm_rate(n), calculated_alarm_rate(n)
    sampling = math.sqrt(expected * (1 - expected) / 2000)
    assert abs(rate - expected) < 3 * sampling
    assert rate <= 0.25  # with known mean and standard deviation it would be 1 - 0.9973**100 = 0.237
