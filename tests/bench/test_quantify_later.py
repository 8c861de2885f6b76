"""Unknowns measured later: which curve is in force, and when there is none."""

from dataclasses import replace

import pytest
from small_laboratory import METHOD, a_day, long_form, state_of, unknown, with_response

from calib.bench import quantify
from calib.bench.amend_run import Change
from calib.bench.register import add_method
from calib.errors import DuplicateFile, InputError

TWO = [unknown("U1", 3.0), unknown("U2", 7.5)]
REJECTED = with_response(a_day(), 3, 40.0)


def refused(bench, lines, words, error=InputError, **head):
    before = state_of(bench.store)
    with pytest.raises(error, match=words):
        bench.quantify(lines, **head)
    assert state_of(bench.store) == before


def test_a_later_run_names_its_curve_and_reads_what_the_first_would_have_read(bench):
    first = bench.log(a_day(unknowns=TWO))
    later = bench.quantify(TWO)
    assert (later.heading.kind, later.curve_run, later.curve_id) == ("unknowns", 1, first.curve_id)
    same = [q for q in first.evaluation.quantities if q.role == "unknown"]
    assert [replace(q, curve_id=None) for q in later.evaluation.quantities] == [
        replace(q, curve_id=None) for q in same
    ]
    assert later.evaluation.standards == first.evaluation.standards
    assert [line.decision for line in bench.laboratory.runs()] == ["accepted", None]


def test_the_latest_curve_before_the_measurement_is_taken(bench):
    bench.log(a_day(), "one.csv", started="2026-04-01T08:00:00+02:00")
    bench.log(a_day(slope=5.01), "three.csv", started="2026-04-01T16:00:00+02:00")
    bench.log(a_day(slope=5.02), "two.csv", started="2026-04-01T12:00:00+02:00")
    assert bench.quantify(TWO, started="2026-04-01T15:00:00+02:00").curve_run == 3
    assert bench.quantify(TWO, "now.csv", started="2026-04-01T14:00:00Z").curve_run == 2  # 16:00 here


def test_a_curve_of_another_instrument_is_not_taken(bench):
    bench.log(a_day())
    refused(bench, TWO, "no curve of LX-2 and method line-a is logged before", instrument="LX-2", serial="78")


def test_a_curve_made_afterwards_is_not_taken(bench):
    bench.log(a_day(), started="2026-04-01T16:00:00+02:00")
    refused(bench, TWO, "is logged before 2026-04-01 15:00; log standards first")


def test_an_expired_curve_is_refused_to_the_minute(bench):
    bench.log(a_day())
    assert bench.quantify(TWO, started="2026-04-02T08:00:00+02:00").curve_run == 1
    refused(
        bench,
        TWO,
        r"curve of run 1 \(2026-04-01 08:00\) was valid for 24 h, until 2026-04-02 08:00, "
        "and these samples were measured 2026-04-02 08:01",
        started="2026-04-02T08:01:00+02:00",
    )


def test_an_older_curve_is_not_taken_because_the_newest_was_rejected(bench):
    bench.log(a_day(), "one.csv")
    bench.log(REJECTED, "two.csv", started="2026-04-01T12:00:00+02:00")
    refused(bench, TWO, r"run 2, 2026-04-01 12:00\) was rejected; log new standards: an older curve is not")
    bench.laboratory.exclude(2, ["#3"], reason="drop fell in")
    assert bench.quantify(TWO).curve_run == 2


def test_a_void_curve_is_passed_over(bench):
    bench.log(a_day(), "one.csv")
    bench.log(REJECTED, "two.csv", started="2026-04-01T12:00:00+02:00")
    bench.laboratory.void(2, reason="wrong rack")
    assert bench.quantify(TWO).curve_run == 1


def test_an_amended_time_moves_the_curve(bench):
    bench.log(a_day())
    bench.laboratory.amend(1, Change(instrument="LX-2"), reason="the other bench")
    refused(bench, TWO, "no curve of LX-1")


def test_a_new_version_of_the_method_needs_new_standards(bench):
    bench.log(a_day())
    text = METHOD.format(name="line-a", analyte="alpha").replace('"mg/L"', '"ug/L"')
    add_method(bench.store, bench.file("line-a.toml", text), by="KM")
    refused(bench, TWO, "judged under another version of the method than 2, the present one")


def test_a_file_with_standards_belongs_to_log(bench):
    bench.log(a_day())
    refused(bench, a_day(slope=5.1), "it holds standards; log it with calib log")


def test_the_same_unknowns_are_refused_a_second_time(bench):
    bench.log(a_day())
    bench.quantify(TWO)
    refused(bench, TWO, "the same file is logged already as run 2", DuplicateFile, name="copy.csv")
    bench.laboratory.void(2, reason="x")
    assert bench.quantify(TWO).heading.id == 3


def test_checks_are_read_and_blanks_are_shown(bench):
    bench.log(a_day())
    lines = [*TWO, *(line for line in a_day() if line.role in ("check", "blank"))]
    later = bench.quantify(lines)
    (check,) = [q for q in later.evaluation.quantities if q.role == "check"]
    assert check.concentration == pytest.approx(5.0, abs=0.05)
    assert [b.label for b in later.evaluation.blanks] == ["B"]


def test_two_analytes_are_quantified_together_or_not_at_all(bench):
    both = long_form({"alpha": TWO, "beta": TWO}, at="2026-04-01T15:00+02:00")
    path = bench.file("two.csv", both)
    bench.log(a_day())
    before = state_of(bench.store)
    with pytest.raises(InputError, match="no curve of LX-1 and method line-b"):
        bench.laboratory.quantify(path, instrument="LX-1", methods=["line-a", "line-b"])
    assert state_of(bench.store) == before
    bench.log(a_day(slope=7.0), "b.csv", method="line-b")
    records = bench.laboratory.quantify(path, instrument="LX-1", methods=["line-a", "line-b"])
    assert [r.curve_run for r in records] == [1, 2]


def test_nothing_is_read_on_a_curve_that_is_superseded_meanwhile(bench, monkeypatch):
    bench.log(a_day())
    real = quantify.quantify_on

    def slow(source, run, basis):
        bench.laboratory.refit(1, reason="someone else")
        return real(source, run, basis)

    monkeypatch.setattr(quantify, "quantify_on", slow)
    with pytest.raises(InputError, match="the curve in force changed meanwhile; run the command again"):
        bench.quantify(TWO)
    assert len(bench.laboratory.runs()) == 1


def test_unknowns_quantified_as_such_are_no_calibration(bench):
    bench.log(a_day())
    bench.quantify(TWO)
    assert len(bench.laboratory.drift("LX-1").runs) == 1
