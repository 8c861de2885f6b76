"""The history of a record: every version with who, when, why, and what changed."""

import pytest
from small_laboratory import a_day

from calib.bench.amend_run import Change
from calib.errors import NotFound


def test_the_history_of_a_run_tells_every_entry_and_change(bench):
    bench.log(a_day())
    bench.log(a_day(5.1), "other.csv", started="2026-03-30T08:00:00+02:00")
    bench.laboratory.amend(1, Change(operator="ZZ", samples=(("U1", "U9"),)), reason="wrong label")
    bench.laboratory.amend(1, Change(dilutions=(("U2", 10.0),)), reason="diluted")
    bench.laboratory.void(1, reason="spilled")
    steps = bench.laboratory.history("run", "1")
    assert [s.action for s in steps] == ["log run", "amend run", "amend run", "void run"]
    assert [s.reason for s in steps] == [None, "wrong label", "diluted", "spilled"]
    changed = {(r.table, *c) for r in steps[1].rows for c in r.changes}
    assert ("run_facts", "operator", "KM", "ZZ") in changed
    assert ("reading", "sample", "U1", "U9") in changed
    assert {r.table for r in steps[0].rows} >= {"run", "reading", "curve", "curve_standard", "verdict"}
    assert all(s.sequence for s in steps)


def test_two_amendments_of_readings_keep_their_own_reasons(bench):
    bench.log(a_day())
    bench.laboratory.amend(1, Change(samples=(("U1", "U9"),)), reason="wrong label")
    record = bench.laboratory.amend(1, Change(dilutions=(("U2", 10.0),)), reason="diluted")
    told = [(a.what, a.reason) for a in record.amendments]
    assert ("sample U1 renamed U9", "wrong label") in told
    assert ("dilution of U2 from 1 to 10", "diluted") in told


@pytest.mark.parametrize(
    ("kind", "name", "action"),
    [
        ("instrument", "LX-1", "add instrument"),
        ("lot", "A-1", "add standard lot"),
        ("method", "line-a", "add method"),
        ("curve", "1", "log run"),
        ("file", "day.csv", "log run"),
    ],
)
def test_any_record_has_a_history(bench, kind, name, action):
    bench.log(a_day())
    (step,) = bench.laboratory.history(kind, name)
    assert (step.action, step.by) == (action, "KM")


def test_an_excluded_reading_that_was_renamed_is_one_line_of_decisions(bench):
    bench.log(a_day())
    bench.laboratory.exclude(1, ["#3"], reason="drop fell in")
    bench.laboratory.amend(1, Change(samples=(("#3", "S2b"),)), reason="wrong label")
    bench.laboratory.restore(1, ["#3"], reason="it was the other cup")
    assert bench.laboratory.check().sound


@pytest.mark.parametrize(("kind", "name"), [("run", "99"), ("lot", "none"), ("colour", "1")])
def test_what_is_not_there_is_said(bench, kind, name):
    with pytest.raises(NotFound):
        bench.laboratory.history(kind, name)
