"""Corrective actions: opened with the results they affect, closed once, with what was done."""

from datetime import datetime

import pytest
from small_laboratory import a_day

from calib.bench.actions import close_action, list_actions, open_action, show_action
from calib.errors import InputError, NotFound

CLOSING = {"correction": "new membrane", "effect": "check recovers 99 %", "by": "QM"}


@pytest.fixture
def two_days(bench):
    bench.log(a_day(), "a.csv", started="2026-03-30T08:00:00+02:00")
    bench.log(a_day(5.1), "b.csv", started="2026-03-31T08:00:00+02:00")
    return bench


def test_an_action_keeps_the_results_it_affects(two_days):
    record = open_action(two_days.store, "lot", "A-1", what="certificate withdrawn", by="QM")
    assert (record.open, record.results) == (True, 6)
    _, results = show_action(two_days.store, 1)
    assert {(q.run, q.sample) for q in results} == {(r, s) for r in (1, 2) for s in ("U1", "U2", "Q")}
    two_days.laboratory.refit(1, reason="new values")
    _, later = show_action(two_days.store, 1)
    assert {q.run for q in later if q.superseded_by is not None} == {1}


def test_a_window_narrows_what_is_affected(two_days):
    since = datetime.fromisoformat("2026-03-31T00:00+02:00")
    assert open_action(two_days.store, "instrument", "LX-1", what="x", by="QM", since=since).results == 3
    with pytest.raises(InputError, match="ends before it begins"):
        open_action(
            two_days.store, "instrument", "LX-1", what="x", by="QM", since=since, until=since.replace(day=30)
        )


def test_an_action_is_closed_once_and_stays_on_record(two_days):
    open_action(two_days.store, "run", "1", what="x", by="QM")
    closed = close_action(two_days.store, 1, **CLOSING)
    assert (closed.open, closed.correction) == (False, "new membrane")
    assert list_actions(two_days.store, only_open=True) == ()
    with pytest.raises(InputError, match="closed already, by QM: new membrane"):
        close_action(two_days.store, 1, **CLOSING)
    assert two_days.laboratory.check().sound


def test_what_is_missing_is_said(two_days):
    with pytest.raises(NotFound):
        open_action(two_days.store, "lot", "none", what="x", by="QM")
    with pytest.raises(InputError, match="say in words"):
        open_action(two_days.store, "lot", "A-1", what=" ", by="QM")
    for number in (7, 10**30):
        with pytest.raises(NotFound, match="there is no action"):
            close_action(two_days.store, number, **CLOSING)
