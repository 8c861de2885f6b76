"""Corrections: each supersedes with a reason, everything that rests on it follows, nothing is lost."""

from datetime import datetime

import pytest
from small_laboratory import a_day, state_of, unknown, with_response
from sqlalchemy import select

from calib import store as tables
from calib.bench import correct_run
from calib.bench.amend_run import Change
from calib.bench.correct_run import find_readings
from calib.bench.keeping_quantities import WITHDRAWN
from calib.bench.register import add_instrument
from calib.errors import DuplicateFile, InputError, NotFound

SPOILED = with_response(a_day(), 3, 40.0)  # reading #3 is standard S2
TWO = [unknown("U1", 3.0), unknown("U2", 7.5)]


def samples(record):
    return {q.sample: q for q in record.evaluation.quantities if q.role == "unknown"}


def quantity_rows(bench, run):
    with bench.store.reading() as session:
        query = select(tables.QuantityRow).where(tables.QuantityRow.run_id == run)
        return session.scalars(query.order_by(tables.QuantityRow.id)).all()


# Exclude and restore.


def test_an_exclusion_with_a_reason_mends_a_spoiled_run(bench):
    assert bench.log(SPOILED).evaluation.verdict.decision == "rejected"
    record = bench.laboratory.exclude(1, ["#3"], reason="drop fell in")
    assert record.evaluation.verdict.decision == "accepted with exclusions"
    assert samples(record)["U2"].concentration == pytest.approx(7.5, abs=0.05)
    (out,) = [s for s in record.evaluation.standards if s.excluded]
    assert (out.key, out.reason, out.fitted) == (3, "drop fell in", False)
    assert record.curves_before == 1
    assert [a.what for a in record.amendments] == [
        "excluded S2 (3), other",
        f"curve {record.curve_id} superseded curve 1",
    ]


def test_a_restored_reading_is_fitted_again(bench):
    before = bench.log(SPOILED)
    bench.laboratory.exclude(1, ["#3"], reason="drop fell in")
    record = bench.laboratory.restore(1, ["#3"], reason="it was the other cup")
    assert record.evaluation.verdict.decision == "rejected"
    assert record.evaluation.curve.parameters == before.evaluation.curve.parameters
    assert not any(s.excluded for s in record.evaluation.standards)
    again = bench.laboratory.exclude(1, ["#3"], reason="no, this one")
    assert [s.key for s in again.evaluation.standards if s.excluded] == [3]
    assert bench.laboratory.check(all_curves=True).sound


def test_a_sample_name_means_all_its_readings_and_a_position_one(bench):
    record = bench.log(SPOILED)
    assert [r.key for r in find_readings(record.readings, "S2")] == [3, 4]
    assert [r.key for r in find_readings(record.readings, "3")] == [3]  # the column n is the position
    assert [r.key for r in find_readings(record.readings, "#4")] == [4]


@pytest.mark.parametrize(
    ("readings", "options", "words"),
    [
        (["S9"], {}, "no reading 'S9' in this run; give a position, a sample name, or #number"),
        (["#99"], {}, "no reading '#99'"),
        (["U1"], {}, r"U1 \(15\) is no standard but unknown; only what is fitted is excluded"),
        (["#3"], {"reason": "  "}, "a correction needs a reason in words"),
        (["#3"], {"reason_class": "mood"}, "unknown class of reason 'mood'; known are assignable cause"),
        ([f"#{i}" for i in range(1, 13)], {}, "no standard with a response is left to fit"),
    ],
)
def test_an_impossible_exclusion_changes_nothing(bench, readings, options, words):
    bench.log(SPOILED)
    before = state_of(bench.store)
    with pytest.raises(InputError, match=words):
        bench.laboratory.exclude(1, readings, **({"reason": "x"} | options))
    assert state_of(bench.store) == before


def test_excluding_twice_and_restoring_what_is_in_are_refused(bench):
    bench.log(SPOILED)
    bench.laboratory.exclude(1, ["#3"], reason="drop fell in")
    before = state_of(bench.store)
    with pytest.raises(InputError, match=r"S2 \(3\) is excluded already \(drop fell in\)"):
        bench.laboratory.exclude(1, ["#3"], reason="x")
    with pytest.raises(InputError, match=r"S2 \(4\) is not excluded; nothing to restore"):
        bench.laboratory.restore(1, ["#4"], reason="x")
    assert state_of(bench.store) == before


def test_excluding_so_many_that_no_curve_is_left_is_a_verdict(bench):
    bench.log(SPOILED)
    record = bench.laboratory.exclude(1, [f"#{i}" for i in range(2, 13)], reason="spilled")
    assert record.evaluation.verdict.decision == "rejected"
    assert samples(record)["U2"].concentration is None


def test_a_refit_gives_the_same_digits(bench):
    first = bench.log(a_day())
    record = bench.laboratory.refit(1, reason="new library")
    assert record.curve_id != first.curve_id
    assert record.evaluation.curve.parameters == first.evaluation.curve.parameters
    assert [q.concentration for q in record.evaluation.quantities] == [
        q.concentration for q in first.evaluation.quantities
    ]


# Later runs on the curve.


def test_later_unknowns_follow_the_curve_they_were_read_on(bench):
    bench.log(SPOILED)
    bench.laboratory.exclude(1, ["#3"], reason="drop fell in")
    later = bench.quantify(TWO)
    assert samples(later)["U1"].concentration == pytest.approx(3.0, abs=0.05)
    bench.laboratory.restore(1, ["#3"], reason="it was the other cup")
    lost = bench.laboratory.run(2)
    assert samples(lost)["U1"].concentration is None
    assert "curve-superseded" in samples(lost)["U1"].flags
    mended = bench.laboratory.exclude(1, ["#3"], reason="no, this one")
    back = bench.laboratory.run(2)
    assert samples(back)["U1"].concentration == samples(later)["U1"].concentration
    assert (back.curve_id, back.curve_run) == (mended.curve_id, 1)
    assert len(quantity_rows(bench, 2)) == 3 * 2  # each time they were read is kept


def test_only_its_own_curve_is_corrected_in_a_run(bench):
    bench.log(a_day())
    bench.quantify(TWO)
    with pytest.raises(InputError, match="run 2 holds unknowns only; its curve belongs to run 1"):
        bench.laboratory.refit(2, reason="x")


# Amend.


def test_facts_are_amended_beside_the_original(bench):
    bench.log(a_day())
    change = Change(operator="RS", at=datetime(2026, 4, 1, 9, 30))
    record = bench.laboratory.amend(1, change, reason="wrong name and hour")
    assert (record.heading.operator, record.heading.lot) == ("RS", "A-1")
    assert record.heading.at.isoformat() == "2026-04-01T09:30:00+02:00"
    assert [(a.by, a.reason) for a in record.amendments] == [("KM", "wrong name and hour")]
    with bench.store.reading() as session:
        assert set(session.scalars(select(tables.RunFacts.operator))) == {"KM", "RS"}


def test_another_instrument_brings_its_own_ceiling(bench):
    add_instrument(
        bench.store,
        "LOW",
        kind="x",
        serial="",
        location="",
        response_ceiling=50.0,
        utc_offset_minutes=0,
        by="KM",
    )
    bench.log(a_day())
    record = bench.laboratory.amend(1, Change(instrument="LOW"), reason="it was the other bench")
    assert record.heading.instrument == "LOW"
    assert record.evaluation.verdict.decision == "rejected"
    assert [s.key for s in record.evaluation.standards if s.saturated] == [11, 12]


def test_a_dilution_is_amended_and_the_result_follows(bench):
    bench.log(a_day(unknowns=TWO))
    record = bench.laboratory.amend(1, Change(dilutions=(("U2", 4.0),)), reason="forgotten in the list")
    assert samples(record)["U2"].concentration == pytest.approx(30.0, abs=0.2)
    assert samples(record)["U2"].dilution == 4.0
    assert len(samples(record)) == 2
    assert [a.reason for a in record.amendments] == ["forgotten in the list"]


def test_a_renamed_sample_supersedes_its_old_name(bench):
    first = bench.log(a_day(unknowns=TWO))
    record = bench.laboratory.amend(1, Change(samples=(("U2", "U9"),)), reason="label misread")
    assert list(samples(record)) == ["U1", "U9"]
    assert samples(record)["U9"].concentration == samples(first)["U2"].concentration
    rows = {row.id: row for row in quantity_rows(bench, 1)}
    (renamed,) = [row for row in rows.values() if row.sample == "U9"]
    assert rows[renamed.supersedes].sample == "U2"


def test_samples_merged_under_one_name_are_one_result(bench):
    near = [unknown("U1", 3.0), unknown("U2", 3.02)]
    bench.log(a_day(unknowns=near))
    record = bench.laboratory.amend(1, Change(samples=(("U2", "U1"),)), reason="the same bottle")
    assert list(samples(record)) == ["U1"]
    assert samples(record)["U1"].replicates == 2
    (gone,) = [row for row in quantity_rows(bench, 1) if WITHDRAWN in row.flags]
    assert (gone.sample, gone.concentration) == ("U2", None)
    apart = bench.laboratory.amend(1, Change(samples=(("#16", "U2"),)), reason="no, two bottles")
    assert {s: q.replicates for s, q in samples(apart).items()} == {"U1": 1, "U2": 1}
    assert bench.laboratory.check(all_curves=True).sound


def test_an_exclusion_outlives_an_amendment_of_its_reading(bench):
    bench.log(SPOILED)
    bench.laboratory.exclude(1, ["#3"], reason="drop fell in")
    record = bench.laboratory.amend(1, Change(samples=(("#3", "S2b"),)), reason="label")
    assert [(s.label, s.excluded) for s in record.evaluation.standards if s.key == 3] == [("S2b", True)]
    again = bench.laboratory.refit(1, reason="to be sure")
    assert again.evaluation.verdict.decision == "accepted with exclusions"


@pytest.mark.parametrize(
    ("change", "error", "words"),
    [
        (Change(), InputError, "nothing to amend: name at least one fact and its new value"),
        (Change(instrument="LX-9"), NotFound, "unknown instrument 'LX-9'"),
        (Change(lot="Z"), NotFound, "unknown standard lot 'Z'"),
        (Change(samples=(("U7", "U8"),)), InputError, "no reading 'U7' in this run"),
        (Change(samples=(("U1", " "),)), InputError, "the new name of sample 'U1' is empty"),
        (Change(dilutions=(("U1", 0.0),)), InputError, "dilution 0 of 'U1' must be above 0"),
        (Change(dilutions=(("U1", float("nan")),)), InputError, "dilution nan of 'U1' must be above 0"),
        (Change(dilutions=(("U1", float("inf")),)), InputError, "dilution inf of 'U1' must be above 0"),
    ],
)
def test_an_impossible_amendment_changes_nothing(bench, change, error, words):
    bench.log(a_day())
    before = state_of(bench.store)
    with pytest.raises(error, match=words):
        bench.laboratory.amend(1, change, reason="x")
    assert state_of(bench.store) == before


# Void.


def test_a_void_run_stays_visible_and_takes_no_correction(bench):
    bench.log(a_day())
    record = bench.laboratory.void(1, reason="wrong rack")
    assert record.heading.void_reason == "wrong rack"
    assert [line.void for line in bench.laboratory.runs()] == [True]
    before = state_of(bench.store)
    deeds = (
        lambda lab: lab.exclude(1, ["#3"], reason="x"),
        lambda lab: lab.restore(1, ["#3"], reason="x"),
        lambda lab: lab.refit(1, reason="x"),
        lambda lab: lab.amend(1, Change(operator="RS"), reason="x"),
        lambda lab: lab.void(1, reason="x"),
    )
    for deed in deeds:
        with pytest.raises(InputError, match=r"run 1 is void .*\(?wrong rack"):
            deed(bench.laboratory)
    assert state_of(bench.store) == before


def test_a_file_may_be_logged_again_once_its_run_is_void(bench):
    bench.log(a_day())
    with pytest.raises(DuplicateFile, match="declare run 1 void first"):
        bench.log(a_day())
    bench.laboratory.void(1, reason="wrong rack")
    assert bench.log(a_day()).heading.id == 2
    with pytest.raises(DuplicateFile, match="as run 2"):
        bench.log(a_day())
    with bench.store.reading() as session:
        assert len(session.scalars(select(tables.Original.id)).all()) == 1


def test_a_run_whose_curve_was_used_is_voided_after_its_users(bench):
    bench.log(a_day())
    bench.quantify(TWO)
    with pytest.raises(InputError, match="its curve was used by run 2; declare these void first"):
        bench.laboratory.void(1, reason="x")
    bench.laboratory.void(2, reason="x")
    assert bench.laboratory.void(1, reason="x").heading.void_reason == "x"


@pytest.mark.parametrize("number", [0, -1, 2, 2**63, 10**30])
def test_a_run_that_does_not_exist_is_named(bench, number):
    bench.log(a_day())
    deeds = (
        lambda lab: lab.run(number),
        lambda lab: lab.exclude(number, ["S1"], reason="x"),
        lambda lab: lab.refit(number, reason="x"),
        lambda lab: lab.amend(number, Change(operator="RS"), reason="x"),
        lambda lab: lab.void(number, reason="x"),
    )
    for deed in deeds:
        with pytest.raises(NotFound, match=f"there is no run {number}; the last one is 1"):
            deed(bench.laboratory)


def test_a_correction_made_meanwhile_is_noticed(bench, monkeypatch):
    bench.log(SPOILED)
    real = correct_run.evaluate_and_check

    def slow(definition, readings, history):
        monkeypatch.setattr(correct_run, "evaluate_and_check", real)
        bench.laboratory.exclude(1, ["#4"], reason="someone else")
        return real(definition, readings, history)

    monkeypatch.setattr(correct_run, "evaluate_and_check", slow)
    with pytest.raises(InputError, match="run 1 was corrected by someone else meanwhile"):
        bench.laboratory.exclude(1, ["#3"], reason="drop fell in")
    assert [s.key for s in bench.laboratory.run(1).evaluation.standards if s.excluded] == [4]


def test_every_correction_is_in_the_record_chain_with_its_reason(bench):
    bench.log(SPOILED)
    bench.laboratory.exclude(1, ["#3"], reason="drop fell in")
    bench.laboratory.amend(1, Change(dilutions=(("U2", 4.0),)), reason="forgotten")
    bench.laboratory.void(1, reason="wrong rack")
    with bench.store.reading() as session:
        query = select(tables.ChainEntry.action, tables.ChainEntry.reason)
        entries = session.execute(query.order_by(tables.ChainEntry.sequence)).all()[-4:]
    assert [tuple(e) for e in entries] == [
        ("log run", None),
        ("exclude readings", "drop fell in"),
        ("amend run", "forgotten"),
        ("void run", "wrong rack"),
    ]


def test_blanks_and_checks_keep_their_roles_through_corrections(bench):
    bench.log(SPOILED)
    record = bench.laboratory.exclude(1, ["#3"], reason="drop fell in")
    (check,) = [q for q in record.evaluation.quantities if q.role == "check"]
    assert check.concentration == pytest.approx(5.0, abs=0.05)
    assert [b.label for b in record.evaluation.blanks] == ["B"]
