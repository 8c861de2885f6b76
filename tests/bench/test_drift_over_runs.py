"""The drift review over a small history whose shift is known."""

from datetime import datetime, timedelta

import pytest
from small_laboratory import METHOD, a_day, with_response

from calib.bench.register import add_event, add_method
from calib.bench.review_drift import review_instrument, reviewed_pairs
from calib.drift.charts import FINAL_RUNS
from calib.errors import InputError, NotFound

FIRST = datetime.fromisoformat("2026-03-01T08:00:00+02:00")
WANDER = (0.0, 0.004, -0.003, 0.002, -0.004, 0.001, 0.003, -0.002, 0.004, -0.001, 0.002, -0.003)


def history(bench, slopes):
    for day, slope in enumerate(slopes):
        at = FIRST + timedelta(days=day)
        bench.log(a_day(slope=slope), f"{day}.csv", started=at.isoformat())


@pytest.fixture
def stepped(bench):
    """As many quiet days as the limits rest on, then a step of 10 % in the slope for three."""
    history(bench, [5.0 * (1.0 + w) for w in (WANDER * 2)[:FINAL_RUNS]] + [5.5] * 3)
    return bench


def test_a_step_signals_at_its_first_run_and_in_its_size(stepped):
    review = stepped.laboratory.drift("LX-1")
    assert len(review.runs) == FINAL_RUNS + 3
    assert [bool(run.signals) for run in review.runs] == [False] * FINAL_RUNS + [True] * 3
    assert review.review.first_signals == (FINAL_RUNS,)
    # A fixed sample of x reads (0.1·5·x + 5·x)/5 on the baseline: 10 % more.
    assert review.shift_percent[-1] == pytest.approx([10.0] * 3, abs=0.5)
    assert abs(review.shift_percent[:FINAL_RUNS]).max() < 1.5
    assert review.recovery_percent == pytest.approx(100.0, abs=1.0)


def test_fewer_than_ten_runs_give_no_limits(bench):
    history(bench, [5.0 * (1.0 + w) for w in WANDER[:9]])
    review = bench.laboratory.drift("LX-1")
    assert all(series.limits is None for series in review.review.series)
    assert (review.baseline_runs, review.review.provisional) == (9, True)


def test_a_declared_restart_begins_a_new_baseline(stepped):
    restart = FIRST + timedelta(days=FINAL_RUNS)
    review = stepped.laboratory.drift("LX-1", since=restart)
    assert (review.restart, review.baseline_runs) == (FINAL_RUNS, 3)
    assert not any(run.signals for run in review.runs)
    local = review_instrument(stepped.store, "LX-1", since=datetime(2026, 3, 21))
    assert local.restart == FINAL_RUNS  # without an offset: the clock of the instrument
    assert stepped.laboratory.drift("LX-1", since=restart + timedelta(days=99)).baseline_runs == 0


def test_rejected_runs_are_shown_and_support_no_limit(bench):
    history(bench, [5.0] * 3)
    bench.log(with_response(a_day(), 3, 40.0), "bad.csv", started="2026-03-20T08:00:00+02:00")
    review = bench.laboratory.drift("LX-1")
    assert [run.decision for run in review.runs] == ["accepted"] * 3 + ["rejected"]
    assert review.baseline_runs == 3


def test_void_runs_are_left_out(bench):
    history(bench, [5.0] * 2)
    bench.laboratory.void(1, reason="x")
    assert [run.id for run in bench.laboratory.drift("LX-1").runs] == [2]
    bench.laboratory.void(2, reason="x")
    assert reviewed_pairs(bench.store) == ()
    with pytest.raises(NotFound, match="nothing to review"):
        bench.laboratory.drift("LX-1", "line-a")


def test_events_stand_beside_the_runs(stepped):
    add_event(stepped.store, "LX-1", at=datetime(2026, 3, 13, 7), kind="part", what="lamp replaced", by="KM")
    (event,) = stepped.laboratory.drift("LX-1").events
    assert (event.at.isoformat(), event.what) == ("2026-03-13T07:00:00+02:00", "lamp replaced")


def test_an_instrument_with_two_methods_asks_which(bench):
    bench.log(a_day())
    bench.log(a_day(slope=7.0), "b.csv", method="line-b")
    with pytest.raises(InputError, match="runs several methods; give --method: line-a, line-b"):
        bench.laboratory.drift("LX-1")
    assert reviewed_pairs(bench.store) == (("LX-1", "line-a"), ("LX-1", "line-b"))


@pytest.mark.parametrize(
    ("instrument", "method", "words"),
    [
        ("LX-9", None, "unknown instrument 'LX-9'"),
        ("LX-1", "line-z", "unknown method 'line-z'"),
        ("LX-2", None, "no run of instrument LX-2 is logged"),
        ("LX-1", "line-b", "no run of instrument LX-1 with method line-b is logged"),
    ],
)
def test_nothing_to_review_is_said(bench, instrument, method, words):
    bench.log(a_day())
    with pytest.raises(NotFound, match=words):
        bench.laboratory.drift(instrument, method)


def test_references_come_from_the_standards_where_the_method_names_none(bench):
    text = METHOD.format(name="free", analyte="alpha").replace("reference_concentrations", "#")
    add_method(bench.store, bench.file("free.toml", text), by="KM")
    bench.log(a_day(), method="free")
    # A fifth, half and four fifths of the range 1 to 10 in ln x.
    assert bench.laboratory.drift("LX-1").references == pytest.approx([10**0.2, 10**0.5, 10**0.8])
