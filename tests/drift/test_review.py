import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from calib.drift import OffBaseline, Track, review_drift, shewhart_limits
from calib.errors import InputError

STABLE = np.tile([99.0, 101.0], 40)


def one(values, accepted=None, restart=0, reasons=()):
    accepted = [True] * len(values) if accepted is None else accepted
    return review_drift([Track("response", "low", values, reasons)], accepted, restart).series[0]


def test_limits_rest_on_the_first_twenty_accepted_runs():
    values = np.arange(30.0)
    accepted = [i not in (3, 7) for i in range(30)]
    series = one(values, accepted)
    used = [i for i in range(22) if i not in (3, 7)]
    assert list(series.baseline) == used
    assert series.limits == shewhart_limits(values[used], charts=1)
    assert not series.limits.provisional


def test_limits_begin_again_at_a_restart():
    values = np.concatenate([STABLE[:25], STABLE[:25] + 50])
    assert one(values).signals[25:].all()
    again = one(values, restart=25)
    assert not again.signals.any()
    assert again.baseline == tuple(range(25, 45))
    assert again.limits.centre == pytest.approx(150)


def test_no_signal_without_limits_and_provisional_ones_below_twenty():
    values = np.append(STABLE[:9], [500.0])
    assert not one(values).signals.any()
    provisional = one(np.append(STABLE[:12], [500.0]))
    assert provisional.signals.tolist() == [False] * 12 + [True]
    assert provisional.limits.provisional


def test_the_first_signal_of_each_excursion():
    values = STABLE[:40].copy()
    values[[25, 26, 28, 33]] = 500.0
    values[27] = math.nan
    series = one(values)
    assert np.flatnonzero(series.signals).tolist() == [25, 26, 28, 33]
    assert series.first_signals == (25, 33)


def test_a_response_that_left_the_baseline_is_a_signal_and_a_missing_one_is_not():
    values = STABLE[:25].copy()
    values[[22, 24]] = math.nan
    reasons = [""] * 25
    reasons[22], reasons[24] = OffBaseline.ABOVE.value, OffBaseline.NO_RESPONSE.value
    series = one(values, reasons=reasons)
    assert np.flatnonzero(series.signals).tolist() == [22]
    assert series.first_signals == (22,)


def test_rejected_runs_are_judged_but_carry_no_limit():
    values = STABLE[:30].copy()
    values[[5, 24]] = 500.0
    series = one(values, [i not in (5, 24) for i in range(30)])
    assert series.limits.centre == pytest.approx(100, abs=0.1)
    assert series.signals[24]


@given(st.integers(0, 2**32 - 1), st.integers(11, 45))
def test_a_signal_does_not_change_as_runs_are_added(seed, cut):
    values = np.random.default_rng(seed).standard_t(2, size=50)
    whole, early = one(values), one(values[:cut])
    assert whole.signals[:cut].tolist() == early.signals.tolist()


def test_charts_of_one_family_share_the_false_alarm_rate():
    tracks = [Track("response", name, STABLE[:30]) for name in ("low", "middle", "high")]
    tracks.append(Track("check standards", "middle", STABLE[:30]))
    review = review_drift(tracks, [True] * 30)
    assert [s.limits for s in review.series] == [shewhart_limits(STABLE[:20], c) for c in (3, 3, 3, 1)]
    assert review.series[0].limits.upper > review.series[3].limits.upper
    assert not review.provisional


def test_the_review_names_the_charts_that_signal_at_a_run():
    shifted = STABLE[:30].copy()
    shifted[26:] = 500.0
    review = review_drift(
        [Track("response", "low", STABLE[:30]), Track("response", "high", shifted)], [True] * 30
    )
    assert review.signals_of(27) == ("response high",)
    assert review.signals_of(10) == ()
    assert review.first_signals == (26,)


def test_a_steady_drift_is_seen():
    noise = np.random.default_rng(4).normal(0, 1, 120)
    drift = np.concatenate([np.zeros(20), 0.1 * np.arange(100)])
    series = one(noise + drift)
    assert series.first_signals
    assert 20 < series.first_signals[0] < 90


@pytest.mark.parametrize(
    ("track", "restart", "words"),
    [
        (Track("response", "low", [1.0, 2.0]), 0, "response low: 2 values"),
        (Track("response", "low", [1.0, 2.0, 3.0], ("", "")), 0, "2 reasons for 3 runs"),
        (Track("response", "low", [1.0, 2.0, 3.0]), 4, "restart 4 is outside the 3 runs"),
        (Track("response", "low", [1.0, 2.0, 3.0]), -1, "restart -1"),
    ],
)
def test_what_does_not_fit_together_is_refused(track, restart, words):
    with pytest.raises(InputError, match=words):
        review_drift([track], [True] * 3, restart)


def test_a_review_of_no_runs_is_empty_of_signals():
    review = review_drift([Track("response", "low", [])], [])
    assert (review.series[0].limits, review.first_signals, review.provisional) == (None, (), True)


def test_what_a_review_holds_cannot_be_written_to():
    series = one(STABLE[:30])
    with pytest.raises(ValueError, match="read-only"):
        series.values[0] = 1.0
