"""Logging a file: what is resolved, what is noted, what is refused; all of a file or nothing."""

import math
from dataclasses import replace
from datetime import datetime

import pytest
from small_laboratory import (
    LEVELS,
    METHOD,
    Line,
    a_day,
    header_block,
    long_form,
    signal,
    standards,
    state_of,
    unknown,
    with_response,
)
from sqlalchemy import select

from calib import store as tables
from calib.bench.log_run import evaluate_plan, log_plan
from calib.bench.plan_run import LogOptions, plan_file
from calib.bench.register import add_instrument, add_method
from calib.errors import CalibError, DuplicateFile, InputError, NotFound, UnknownUnit


def quantity(record, sample, dilution=1.0):
    (found,) = [q for q in record.evaluation.quantities if (q.sample, q.dilution) == (sample, dilution)]
    return found


def refused(bench, text, error=InputError, name="day.csv", **options):
    """The one line of a refusal, after which the store is as it was."""
    before = state_of(bench.store)
    with pytest.raises(error) as caught:
        bench.laboratory.log(bench.file(name, text), **options)
    assert state_of(bench.store) == before
    assert "\n" not in str(caught.value)
    assert caught.type is error
    return str(caught.value)


def test_a_day_is_logged_judged_and_quantified(bench):
    record = bench.log(a_day())
    heading = record.heading
    assert (heading.instrument, heading.method, heading.method_version) == ("LX-1", "line-a", 1)
    assert (heading.operator, heading.by, heading.lot, heading.file) == ("KM", "KM", "A-1", "day.csv")
    assert heading.at.isoformat() == "2026-04-01T08:00:00+02:00"
    assert record.evaluation.verdict.decision == "accepted"
    assert quantity(record, "U1").concentration == pytest.approx(3.01, abs=0.01)
    assert quantity(record, "U1").replicates == 2
    assert quantity(record, "U2").flags == ()


def test_one_file_is_one_entry_of_the_record_chain(bench):
    sequence, _ = bench.store.head()
    bench.log(a_day())
    assert bench.store.head()[0] == sequence + 1


def test_the_original_bytes_are_kept(bench):
    text = header_block(a_day())
    bench.log(a_day())
    with bench.store.reading() as session:
        assert session.scalars(select(tables.Original.content)).one() == text.encode()


# What the file leaves open.


def test_what_is_said_beside_the_file_is_used(bench):
    text = header_block(a_day(), instrument=None, serial=None, method=None, started=None, standard_lot=None)
    before = state_of(bench.store)
    with pytest.raises(InputError, match="the file does not say which instrument; give --instrument"):
        bench.laboratory.log(bench.file("a.csv", text))
    with pytest.raises(InputError, match="the file does not say which method; give --method"):
        bench.laboratory.log(bench.file("a.csv", text), instrument="LX-1")
    with pytest.raises(InputError, match="no time of measurement; give --at"):
        bench.laboratory.log(bench.file("a.csv", text), instrument="LX-1", methods=["line-a"])
    assert state_of(bench.store) == before
    plan = plan_file(
        bench.store,
        bench.file("a.csv", text),
        LogOptions("RS", "LX-1", ("line-a",), HEADLESS_TIME, "A-1"),
    )
    (record,) = log_plan(bench.store, evaluate_plan(plan))
    assert record.heading.at.isoformat() == "2026-04-02T10:00:00+02:00"  # the clock of the instrument
    assert (record.heading.lot, record.heading.operator) == ("A-1", "KM")


HEADLESS_TIME = datetime(2026, 4, 2, 10, 0)


def test_the_operator_is_who_acts_where_the_file_is_silent(bench):
    bench_by = replace(bench.laboratory, by="RS")
    (record,) = bench_by.log(bench.file("a.csv", header_block(a_day(), operator=None, standard_lot=None)))
    assert (record.heading.operator, record.heading.lot) == ("RS", None)


def test_the_time_of_the_first_reading_serves_where_there_is_no_other(bench):
    text = long_form({"alpha": a_day()}, at="2026-04-01 07:30")
    (record,) = bench.laboratory.log(bench.file("a.csv", text), instrument="LX-1", methods=["line-a"])
    assert record.heading.at.isoformat() == "2026-04-01T07:30:00+02:00"


# Refusals.


@pytest.mark.parametrize(
    ("head", "error", "words"),
    [
        (
            {"serial": "78"},
            InputError,
            "written by serial 78, but instrument LX-1 is registered with serial 77",
        ),
        ({"instrument": "LX-9"}, NotFound, "unknown instrument 'LX-9'; known are LX-1, LX-2"),
        ({"method": "line-z"}, NotFound, "unknown method 'line-z'; known are line-a, line-b"),
        ({"standard_lot": "Z-9"}, NotFound, "unknown standard lot 'Z-9'; known are A-1"),
        ({"response": "nA"}, InputError, "responses are in 'nA', but method line-a expects 'mV'"),
        ({"unit": "mmol/L"}, UnknownUnit, "day.csv, method line-a: mmol/L .* cannot be converted to mg/L"),
    ],
)
def test_what_does_not_fit_is_refused(bench, head, error, words):
    with pytest.raises(error, match=words):
        raise error(refused(bench, header_block(a_day(), **head), error))


def test_a_contradiction_between_file_and_person_is_refused(bench):
    text = header_block(a_day())
    words = refused(bench, text, instrument="LX-2")
    assert "the file says instrument LX-1, but --instrument says LX-2; one is wrong" in words
    assert "the file says method line-a, but --method says line-b" in refused(bench, text, methods=["line-b"])


def test_unknowns_alone_are_sent_to_quantify(bench):
    assert "calib quantify" in refused(bench, header_block([unknown("U1", 3.0)]))


def test_standards_without_any_response_are_refused(bench):
    lines = [replace(line, response="ERR") for line in standards()]
    assert "no standard with a response is left to fit" in refused(bench, header_block(lines))


@pytest.mark.parametrize(("level", "response"), [(1e300, 1.0), (1e-300, 1.0), (1.0, 1e300), (1.0, -1e300)])
def test_numbers_nobody_measured_are_refused_with_their_place(bench, level, response):
    lines = [*standards(), Line("S7", "standard", level, response)]
    assert "row 20, column signal: " in refused(bench, header_block(lines))


def test_an_instrument_without_a_registered_serial_takes_any_file(bench):
    add_instrument(
        bench.store,
        "LX-3",
        kind="x",
        serial="",
        location="",
        response_ceiling=None,
        utc_offset_minutes=0,
        by="KM",
    )
    assert bench.log(a_day(), instrument="LX-3", serial="12345").heading.instrument == "LX-3"


# Units.


def test_a_conversion_of_units_is_noted_and_done(bench):
    lines = [replace(line, level=line.level * 1000.0) if line.level else line for line in a_day()]
    path = bench.file("day.csv", header_block(lines, unit="ug/L"))
    plan = plan_file(bench.store, path, LogOptions("KM"))
    assert plan.runs[0].notes == ("concentrations converted from ug/L to mg/L: × 0.001",)
    (record,) = log_plan(bench.store, evaluate_plan(plan))
    reference = bench.log(a_day(), "other.csv", started="2026-04-02T08:00:00+02:00")
    found, expected = quantity(record, "U1"), quantity(reference, "U1")
    assert found.unit == "mg/L"
    assert found.concentration == pytest.approx(expected.concentration, rel=1e-9)
    assert found.u == pytest.approx(expected.u, rel=1e-9)
    assert record.evaluation.verdict.highest == pytest.approx(10.0)


# The same readings a second time.


def test_the_same_bytes_are_refused_under_any_name(bench):
    bench.log(a_day())
    words = refused(bench, header_block(a_day()), DuplicateFile, name="other.csv")
    assert words.startswith(
        "other.csv: the same file is logged already as run 1 (day.csv); nothing was written"
    )


def test_the_same_readings_in_another_layout_are_refused(bench):
    bench.log(a_day())
    text = long_form({"alpha": a_day()})
    words = refused(bench, text, DuplicateFile, name="other.csv", instrument="LX-1", methods=["line-a"])
    assert "the same readings, in another form, are logged already as run 1" in words


def test_an_edited_copy_with_the_same_start_is_refused(bench):
    bench.log(a_day())
    edited = header_block([*a_day(), unknown("U3", 2.0)])
    words = refused(bench, edited, DuplicateFile, name="more.csv")
    assert "run 1 of LX-1 and method line-a started at the same time, 2026-04-01 08:00:00" in words


def test_a_duplicate_found_only_while_writing_is_refused(bench):
    plan = plan_file(bench.store, bench.file("a.csv", header_block(a_day())), LogOptions("KM"))
    evaluated = evaluate_plan(plan)
    log_plan(bench.store, evaluated)
    before = state_of(bench.store)
    with pytest.raises(DuplicateFile):
        log_plan(bench.store, evaluated)
    assert state_of(bench.store) == before


# Several runs in one file.


def test_two_analytes_of_one_file_are_two_runs_in_one_transaction(bench):
    text = long_form({"alpha": a_day(), "beta": a_day(slope=7.0)})
    sequence, _ = bench.store.head()
    records = bench.laboratory.log(
        bench.file("two.csv", text), instrument="LX-1", methods=["line-a", "line-b"]
    )
    assert [r.heading.method for r in records] == ["line-a", "line-b"]
    assert [r.evaluation.curve.parameters["slope"] for r in records] == pytest.approx([5.0, 7.0], abs=0.05)
    assert bench.store.head()[0] == sequence + 1


def test_two_analytes_are_all_or_nothing(bench):
    text = long_form({"alpha": a_day(), "beta": [unknown("U1", 3.0)]})
    assert "no standards in it" in refused(bench, text, instrument="LX-1", methods=["line-a", "line-b"])
    first = bench.laboratory.log(
        bench.file("one.csv", long_form({"beta": a_day(slope=7.0)})), instrument="LX-1", methods=["line-b"]
    )
    text = long_form({"alpha": a_day(), "beta": a_day(slope=7.0)})
    words = refused(bench, text, DuplicateFile, instrument="LX-1", methods=["line-a", "line-b"])
    assert f"as run {first[0].heading.id}" in words


def test_one_method_never_serves_two_analytes_of_a_file(bench):
    text = long_form({"alpha": a_day(), "beta": a_day(slope=7.0)})
    words = refused(bench, text, instrument="LX-1", methods=["line-a"])
    assert "method line-a cannot be for both 'alpha' and 'beta'; give --method once for each analyte" in words


def test_an_analyte_that_fits_no_method_is_named(bench):
    text = long_form({"alpha": a_day(), "gamma": a_day(slope=7.0)})
    words = refused(bench, text, instrument="LX-1", methods=["line-a", "line-b"])
    assert "which of the methods line-a, line-b belongs to 'gamma' is not clear" in words


def test_two_instruments_of_one_file_share_a_method(bench):
    text = long_form({"LX-1": a_day(), "LX-2": a_day(slope=6.0)}, column="instrument")
    records = bench.laboratory.log(bench.file("two.csv", text), methods=["line-a"])
    assert [r.heading.instrument for r in records] == ["LX-1", "LX-2"]


# What is reported.


def test_a_rejected_curve_gives_no_concentrations(bench):
    record = bench.log(with_response(a_day(), 3, 40.0))
    assert record.evaluation.verdict.decision == "rejected"
    samples = [q for q in record.evaluation.quantities if q.role == "unknown"]
    assert [(q.concentration, q.estimate, q.u, q.lower) for q in samples] == [(None, None, None, None)] * 2
    assert all("curve-rejected" in q.flags for q in samples)
    assert all(q.mean_response is not None for q in samples)


@pytest.mark.parametrize(("concentration", "position"), [(14.0, "above"), (0.6, "below")])
def test_outside_the_standards_the_estimate_is_stored_and_none_reported(bench, concentration, position):
    found = quantity(bench.log(a_day(unknowns=[unknown("U1", concentration)])), "U1")
    assert found.concentration is None
    assert found.estimate == pytest.approx(concentration, abs=0.02)
    assert found.position == position
    assert f"{position}-range" in found.flags


def test_a_dilution_multiplies_value_uncertainty_and_limits(bench):
    day = a_day(unknowns=[unknown("U1", 4.0), unknown("U1", 4.0, dilution=10.0)])
    record = bench.log(day)
    plain, diluted = quantity(record, "U1"), quantity(record, "U1", 10.0)
    for name in ("concentration", "u", "expanded", "lower", "upper"):
        assert getattr(diluted, name) == pytest.approx(10.0 * getattr(plain, name), rel=1e-12)
    assert diluted.k == plain.k
    assert diluted.budget.keys() == plain.budget.keys()
    assert math.hypot(*diluted.budget.values()) == pytest.approx(diluted.u, rel=1e-6)


def test_more_replicates_narrow_the_interval(bench):
    day = a_day(unknowns=[unknown("one", 4.0), *[unknown("four", 4.0)] * 4])
    record = bench.log(day)
    one, four = quantity(record, "one"), quantity(record, "four")
    assert (one.replicates, four.replicates) == (1, 4)
    assert four.u < one.u
    reading = "repeatability of the reading"
    assert four.budget[reading] == pytest.approx(one.budget[reading] / 2.0, rel=1e-9)


def test_replicates_far_apart_are_flagged(bench):
    day = a_day(unknowns=[unknown("U1", 4.0), unknown("U1", 4.6)])
    assert "replicate-spread" in quantity(bench.log(day), "U1").flags


def test_absent_readings_are_told_and_left_out(bench):
    lost = [unknown("U1", 4.0), Line("U1", "unknown", None, "ERR"), Line("U2", "unknown", None, "ND")]
    record = bench.log(a_day(unknowns=lost))
    one, none = quantity(record, "U1"), quantity(record, "U2")
    assert (one.replicates, one.flags) == (1, ("absent-reading",))
    assert (none.replicates, none.mean_response, none.concentration) == (0, None, None)
    assert none.flags == ("absent-reading", "no-value")


def test_an_overflow_is_a_saturated_reading(bench):
    found = quantity(bench.log(a_day(unknowns=[Line("U1", "unknown", None, "OVRFLW")])), "U1")
    assert found.flags == ("saturated", "absent-reading", "no-value")


def test_a_standard_at_the_ceiling_rejects_the_curve(bench):
    record = bench.log(with_response(a_day(), 12, "OVRFLW"))
    failed = {c.id for c in record.evaluation.verdict.criteria if not c.passed}
    assert "saturated_standards" in failed


def test_two_readings_of_one_sample_at_two_dilutions_are_two_results(bench):
    record = bench.log(a_day(unknowns=[unknown("U1", 12.0), unknown("U1", 6.0, dilution=2.0)]))
    assert quantity(record, "U1").position == "above"
    assert quantity(record, "U1", 2.0).concentration == pytest.approx(12.0, abs=0.03)


@pytest.mark.parametrize(
    "lines",
    [
        [Line("S1", "standard", 1.0, 7.0)],
        [Line(f"S{i}", "standard", 1.0, 7.0 + i) for i in range(6)],
        [Line(f"S{i}", "standard", 0.0, 7.0 + i) for i in range(6)],
        [Line(f"S{i}", "standard", level, 7.0) for i, level in enumerate(LEVELS)],
        [Line(f"S{i}", "standard", level, signal(level)) for i, level in enumerate(LEVELS)],
        [Line(f"S{i}", "standard", level, (-1.0) ** i * 9.0) for i, level in enumerate(LEVELS)],
    ],
    ids=["one", "one level", "level zero", "flat", "exact", "zigzag"],
)
@pytest.mark.parametrize("model", ["line", "quadratic", "saturation", "4PL"])
def test_standards_of_any_kind_are_logged_with_a_verdict(bench, lines, model):
    text = METHOD.format(name="other", analyte="alpha").replace('model = "line"', f'model = "{model}"')
    add_method(bench.store, bench.file("other.toml", text), by="KM")
    record = bench.log([*lines, unknown("U1", 3.0), unknown("U2", -9.0)], method="other")
    assert record.evaluation.verdict.decision in ("accepted", "rejected")
    assert bench.laboratory.check(all_curves=True).findings == ()


def test_every_refusal_is_of_the_one_family(bench):
    with pytest.raises(CalibError):
        bench.laboratory.log(bench.folder / "none.csv")
