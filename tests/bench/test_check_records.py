"""The check of the records finds what was done to a stored curve, and what no longer comes out again."""

import sqlite3
from contextlib import closing
from dataclasses import replace

import pytest
from small_laboratory import a_day
from sqlalchemy import select

from calib import store as tables
from calib.bench import check_records
from calib.bench.evaluate import evaluate
from calib.bench.keeping import add_evaluation, current_readings


def tamper(bench, *statements):
    """Do what a person with a general SQLite tool can do."""
    with closing(sqlite3.connect(bench.store.path)) as connection:
        for statement in statements:
            connection.execute(statement)
        connection.commit()


def supersede_with_other_digits(bench, factor):
    """Write a curve over that of run 1 of which one back-calculated value is off by a factor."""
    record = bench.laboratory.run(1)
    evaluation = evaluate(record.definition, record.readings)
    standards = list(evaluation.standards)
    standards[5] = replace(standards[5], back_calculated=standards[5].back_calculated * factor)
    with bench.store.change("refit run", "KM", "spoiled") as session:
        ids = {row.ordinal: row.id for row in current_readings(session, 1)}
        add_evaluation(
            session,
            1,
            replace(evaluation, standards=tuple(standards)),
            ids,
            by="KM",
            at=bench.store.now(),
            supersedes=record.curve_id,
            reason="spoiled",
        )


def codes(bench):
    return [(f.code, f.place) for f in bench.laboratory.check(all_curves=True).findings]


def test_a_sound_store_says_so(bench):
    bench.log(a_day())
    check = bench.laboratory.check()
    assert (check.sound, check.curves) == (True, 1)
    assert (check.head_sequence, check.head_hash) == bench.store.head()


@pytest.mark.parametrize(
    ("table", "deed", "place"),
    [
        ("curve", """UPDATE curve SET parameters = '{"intercept":2,"slope":6}' WHERE id = 1""", "curve 1"),
        ("curve", "UPDATE curve SET residual_sd = 0.001 WHERE id = 1", "curve 1"),
        ("verdict", "UPDATE verdict SET decision = 'rejected' WHERE id = 1", "verdict 1"),
        ("quantity", "UPDATE quantity SET concentration = 99 WHERE id = 1", "quantity 1"),
        ("curve_standard", "UPDATE curve_standard SET excluded = 1 WHERE id = 1", "curve_standard 1"),
        ("run_facts", "UPDATE run_facts SET operator = 'XX' WHERE id = 1", "run_facts 1"),
    ],
)
def test_a_tampered_row_is_found(bench, table, deed, place):
    bench.log(a_day())
    tamper(bench, f"DROP TRIGGER {table}_no_update", deed)
    assert ("row-changed", place) in codes(bench)


def test_the_triggers_refuse_it_before(bench):
    bench.log(a_day())
    with pytest.raises(sqlite3.IntegrityError):
        tamper(bench, "UPDATE curve SET residual_sd = 0.001 WHERE id = 1")


def test_digits_that_do_not_come_out_again_are_found(bench):
    bench.log(a_day())
    supersede_with_other_digits(bench, 1.0 + 1e-7)
    check = bench.laboratory.check()
    (finding,) = check.findings
    assert (finding.code, finding.place) == ("curve-differs", "run 1")
    assert "back-calculated values differ by 1.0e-07 (fitted with calib" in finding.message
    assert not check.sound


def test_digits_within_the_promise_are_no_finding(bench):
    bench.log(a_day())
    supersede_with_other_digits(bench, 1.0 + 1e-10)
    assert codes(bench) == []


def test_another_verdict_than_the_stored_one_is_found(bench, monkeypatch):
    bench.log(a_day())

    def stricter(definition, readings, history):
        found = evaluate(definition, readings, history)
        return replace(found, verdict=replace(found.verdict, decision="rejected"))

    monkeypatch.setattr(check_records, "evaluate_and_check", stricter)
    assert codes(bench) == [("curve-differs", "run 1")]


def test_a_sample_of_the_curves_is_fitted_again_unless_all_are_wanted(bench, monkeypatch):
    monkeypatch.setattr(check_records, "SAMPLE", 2)
    for hour in range(3):
        bench.log(a_day(), f"{hour}.csv", started=f"2026-04-01T1{hour}:00:00+02:00")
    assert bench.laboratory.check().curves == 2
    assert bench.laboratory.check(all_curves=True).curves == 3


def test_progress_is_told(bench):
    bench.log(a_day())
    seen = []
    check_records.check_records(bench.store, progress=lambda done, total: seen.append((done, total)))
    with bench.store.reading() as session:
        assert session.scalars(select(tables.Run.id)).all() == [1]
    assert seen[-1][0] == seen[-1][1]
