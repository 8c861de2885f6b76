"""Reporting limit, replicates, brackets, carry-over and events in runs that are logged."""

from datetime import datetime

import pytest
from small_laboratory import METHOD, Line, a_day, signal, standards, unknown

from calib.bench.method_definition import read_definition
from calib.bench.register import add_event, add_method
from calib.errors import CalibError
from calib.report.wording import result_text

TEXT = METHOD.format(name="line-a", analyte="alpha")


def ruled(bench, *tables, text=TEXT):
    add_method(bench.store, bench.file("ruled.toml", text + "\n" + "\n".join(tables)), by="KM")
    return bench


def sample(record, name):
    return next(q for q in record.evaluation.quantities if q.sample == name)


def check(name="Q", found=5.0):
    return Line(name, "check", 5.0, signal(found))


# Reporting limit.


def test_below_the_reporting_limit_the_estimate_is_kept_and_the_limit_scales_with_the_dilution(bench):
    ruled(bench, '[results]\nreporting_limit = "2.5 mg/L"\n')
    record = bench.log(
        a_day(unknowns=[unknown("U1", 2.4), unknown("U2", 2.4, dilution=10.0), unknown("U3", 2.6)])
    )
    low, diluted, high = (sample(record, name) for name in ("U1", "U2", "U3"))
    assert (low.concentration, low.position) == (None, "below")
    assert low.estimate == pytest.approx(2.4, abs=0.05)
    assert "below-reporting-limit" in low.flags
    assert high.concentration == pytest.approx(2.6, abs=0.05)
    texts = [result_text(q, record.lowest_reported, 10.0) for q in (low, diluted)]
    assert texts == ["< 2.5 mg/L", "< 25 mg/L"]
    assert sample(bench.laboratory.run(1), "U1") == low


def test_the_range_is_judged_before_the_dilution(bench):
    record = bench.log(a_day(unknowns=[unknown("U1", 11.0), unknown("U2", 5.0, dilution=10.0)]))
    assert (sample(record, "U1").position, sample(record, "U1").concentration) == ("above", None)
    assert sample(record, "U2").concentration == pytest.approx(50.0, abs=0.5)


def test_a_negative_value_is_kept_as_it_is(bench):
    record = bench.log(a_day(unknowns=[unknown("U1", -0.4)]))
    assert sample(record, "U1").estimate == pytest.approx(-0.4, abs=0.05)


# Replicates.


def test_the_method_says_whether_a_single_reading_is_a_result(bench):
    ruled(bench, "[results]\nminimum_replicates = 2\n")
    record = bench.log(a_day())
    assert "too-few-replicates" not in sample(record, "U1").flags
    assert "too-few-replicates" in sample(record, "U2").flags


@pytest.mark.parametrize(("limit", "flagged"), [("10 %", False), ("9 %", True)])
def test_replicates_agree_within_their_coefficient_of_variation(bench, limit, flagged):
    ruled(bench, f'[results]\nreplicate_cv = "{limit}"\n')
    # Two readings 6.75 % either side of their mean: a coefficient of variation of 6.75 % times the root of 2, 9.55 %.
    lines = [Line("U1", "unknown", None, 20.0 * f) for f in (1 - 0.0675, 1 + 0.0675)]
    assert ("replicate-cv" in sample(bench.log(a_day(unknowns=lines)), "U1").flags) is flagged


# Brackets.


def bracketed_day(*checks):
    """Standards, then samples A and B, each pair between two of the checks."""
    first, second, third = (check(f"Q{n}", found) for n, found in enumerate(checks, start=1))
    return [
        *standards(),
        Line("B", "blank", None, 2.01),
        first,
        unknown("A", 3.0),
        second,
        unknown("B1", 4.0),
        third,
    ]


@pytest.mark.parametrize(
    ("checks", "flagged"),
    [((5, 5, 5), []), ((5, 5, 6), ["B1"]), ((6, 5, 5), ["A"]), ((5, 6, 5), ["A", "B1"])],
)
def test_a_failing_check_costs_the_samples_around_it_and_not_the_curve(bench, checks, flagged):
    ruled(bench, "[checks]\nbracket = true\nevery = 10\n")
    record = bench.log(bracketed_day(*checks))
    assert record.evaluation.verdict.decision == "accepted"
    assert bool(record.evaluation.verdict.warnings) is bool(flagged)
    assert [q.sample for q in record.evaluation.quantities if "not-bracketed" in q.flags] == flagged


def test_without_brackets_a_failing_check_rejects(bench):
    assert bench.log(bracketed_day(5, 6, 5)).evaluation.verdict.decision == "rejected"


def test_a_non_detect_beside_a_check_that_read_high_is_kept_only_where_the_method_says_so(bench):
    ruled(bench, "[checks]\nbracket = true\nkeep_high_bias_non_detects = true\n")
    lines = [
        *standards(),
        check("Q1", 6.0),
        unknown("A", 0.2),
        check("Q2"),
        unknown("B", 3.0),
        check("Q3", 6.0),
    ]
    record = bench.log(lines)
    assert "high-bias-kept" in sample(record, "A").flags
    assert "not-bracketed" in sample(record, "B").flags


# Carry-over.


def test_a_sample_after_a_high_one_is_doubted_when_something_is_carried_over(bench):
    acceptance = TEXT.replace("[curve]", 'carry_over = 0.2\nwarn_only = ["carry_over"]\n\n[curve]')
    ruled(bench, text=acceptance)
    lines = [
        *standards(),
        Line("CO", "carry-over", None, signal(0.5)),
        unknown("A", 3.0),
        unknown("H", 15.0),
        unknown("B", 3.0),
        unknown("C", 3.0),
    ]
    record = bench.log(lines)
    (told,) = record.evaluation.verdict.warnings
    assert told.startswith("carry-over blank at most 20 % of the response of the lowest standard: 5")
    assert [q.sample for q in record.evaluation.quantities if "carry-over-risk" in q.flags] == ["B"]


# A curve after an event.


@pytest.mark.parametrize(
    ("kind", "lines", "used"),
    [
        ("part", [unknown("L", 3.0)], False),
        ("part", [unknown("L", 3.0), check()], False),
        ("part", [check(found=6.0), unknown("L", 3.0)], False),
        ("part", [check(), unknown("L", 3.0)], True),
        ("other", [unknown("L", 3.0)], True),
    ],
)
def test_a_curve_needs_a_passing_check_after_an_event(bench, kind, lines, used):
    bench.log(a_day())
    add_event(bench.store, "LX-1", at=datetime(2026, 4, 1, 12, 0), kind=kind, what="lamp replaced", by="KM")
    if used:
        assert bench.quantify(lines).curve_run == 1
    else:
        with pytest.raises(CalibError, match=r"curve of run 1 needs a check: 2026-04-01 12:00 lamp replaced"):
            bench.quantify(lines)


def test_a_check_that_passed_since_the_event_serves_later_runs(bench):
    bench.log(a_day())
    add_event(bench.store, "LX-1", at=datetime(2026, 4, 1, 12, 0), kind="part", what="lamp replaced", by="KM")
    bench.quantify([check(), unknown("L", 3.0)])
    later = bench.quantify([unknown("M", 4.0)], name="more.csv", started="2026-04-01T16:00:00+02:00")
    assert later.curve_run == 1


def test_a_method_may_name_the_events_that_matter(bench):
    ruled(bench, text=TEXT.replace('valid_for = "24 h"', 'valid_for = "24 h"\nneeds_check_after = ["lot"]'))
    bench.log(a_day())
    add_event(bench.store, "LX-1", at=datetime(2026, 4, 1, 12, 0), kind="part", what="lamp replaced", by="KM")
    assert bench.quantify([unknown("L", 3.0)]).curve_run == 1


@pytest.mark.parametrize(
    ("tables", "words"),
    [
        ("[results]\nreporting_limit = 0.1\n", "line 18: results.reporting_limit = 0.1 has no unit"),
        ('[results]\nreporting_limit = "-1 mg/L"\n', "must be above 0"),
        ("[results]\nminimum_replicates = 0\n", "results.minimum_replicates = 0 must be a whole number"),
        ('[results]\nreplicate_cv = "much"\n', "results.replicate_cv = 'much' must be a fraction"),
        (
            '[results]\nwhich_dilution = "best"\n',
            "results.which_dilution = 'best' is unknown; known are least",
        ),
        ("[results]\ncolour = 1\n", "unknown key 'results.colour'; known are reporting_limit"),
        ("[checks]\nevery = 10\n", "checks.every needs bracket = true"),
        ("[checks]\nbracket = 1\n", "checks.bracket = 1 must be true or false"),
        ('[specification]\nupper = "5 mg/L"\n', r"line 17: \[specification\] needs a decision_rule"),
        (
            '[specification]\nupper = 5\ndecision_rule = "simple acceptance"\n',
            "line 18: specification.upper = 5 has no unit",
        ),
        ('[specification]\ndecision_rule = "simple acceptance"\n', "needs a lower or an upper limit"),
        ('[specification]\nupper = "5 mg/L"\ndecision_rule = "hope"\n', "unknown decision rule 'hope'"),
        (
            '[specification]\nupper = "5 mg/L"\nlower = "6 mg/L"\ndecision_rule = "simple acceptance"\n',
            "the lower limit 6 must be below the upper one 5",
        ),
    ],
)
def test_wrong_tables_are_refused_in_words(tables, words):
    with pytest.raises(CalibError, match=words):
        read_definition(TEXT + "\n" + tables)


def test_brackets_need_a_limit_for_their_checks():
    text = TEXT.replace("residual_sd = 0.2", 'residual_sd = 0.2\nleft_out = ["check_recovery"]')
    with pytest.raises(CalibError, match=r"checks.bracket needs the acceptance limit check_recovery"):
        read_definition(text + "\n[checks]\nbracket = true\n")
