"""A method that asks for the exclusion rule: every curve is kept, and people's exclusions come first."""

from dataclasses import replace

import pytest
from small_laboratory import METHOD, a_day, header_block, standards
from sqlalchemy import select

from calib import store as tables
from calib.bench.check_records import check_records
from calib.bench.method_definition import read_definition
from calib.bench.register import add_method
from calib.errors import CalibError

LEVELS = (1.0, 2.0, 3.0, 4.0, 5.0, 6.0, 8.0, 10.0)
WITH_RULE = (
    METHOD.format(name="line-a", analyte="alpha").replace(
        "residual_sd = 0.2",
        'residual_sd = 2.0\nstandards_passing = 0.75\nlevels_passing = 6\nleft_out = ["lack_of_fit"]',
    )
    + '\n[exclusion]\nrule = "most deviant first"\n'
)


@pytest.fixture
def ruled(bench):
    add_method(bench.store, bench.file("ruled.toml", WITH_RULE), by="KM")
    return bench


def day(**factors):
    """One reading a level; factor names are S1 to S8."""
    rows = standards(levels=LEVELS)[::2]
    return [
        *(replace(row, response=row.response * factors.get(row.sample, 1.0)) for row in rows),
        *a_day()[12:],
    ]


def test_a_failing_standard_is_left_out_and_labelled_as_the_rule_it_is(ruled):
    record = ruled.log(day(S6=1.5))
    assert record.evaluation.verdict.decision == "accepted with exclusions"
    (out,) = [s for s in record.evaluation.standards if s.excluded]
    assert out.label == "S6"
    assert out.reason.startswith("exclusion rule of the method (most deviant first), step 1: S6")
    again = ruled.laboratory.run(1)
    assert again.evaluation.standards == record.evaluation.standards
    assert (again.curves_before, record.curves_before) == (1, 1)
    assert record.evaluation.quantities[0].concentration is not None


def test_every_curve_on_the_way_is_kept_with_what_it_said(ruled):
    ruled.log(day(S6=1.5, S3=0.5))
    with ruled.store.reading() as session:
        curves = session.scalars(select(tables.Curve).order_by(tables.Curve.id)).all()
        verdicts = session.scalars(select(tables.VerdictRow).order_by(tables.VerdictRow.curve_id)).all()
        rows = session.scalars(select(tables.CurveStandard)).all()
    assert [c.supersedes for c in curves] == [None, *(c.id for c in curves[:-1])]
    assert [c.reason for c in curves] == [
        None,
        "exclusion rule of the method, step 1",
        "exclusion rule of the method, step 2",
    ]
    assert [v.decision for v in verdicts] == ["rejected", "rejected", "accepted with exclusions"]
    assert [sum(r.excluded for r in rows if r.curve_id == c.id) for c in curves] == [0, 1, 2]
    assert check_records(ruled.store, all_curves=True).findings == ()


def test_too_many_failing_standards_reject_the_run(ruled):
    record = ruled.log(day(S6=1.6, S3=0.4, S4=2.6))
    assert record.evaluation.verdict.decision == "rejected"
    assert sum(s.excluded for s in record.evaluation.standards) <= 2


def test_a_cause_known_before_the_fit_is_a_class_of_its_own_and_counts(ruled):
    path = ruled.file("day.csv", header_block(day(S6=1.5)))
    (record,) = ruled.laboratory.log(path, exclusions=(("#6", "pipette tip fell off"),))
    assert record.evaluation.verdict.decision == "accepted with exclusions"
    assert record.evaluation.before == ()
    assert [s.reason for s in record.evaluation.standards if s.excluded] == ["pipette tip fell off"]
    with ruled.store.reading() as session:
        (row,) = session.scalars(select(tables.Exclusion)).all()
    assert (row.reason_class, row.reason) == ("assignable cause", "pipette tip fell off")


@pytest.mark.parametrize(
    ("exclusion", "words"),
    [
        (("S99", "x"), "no reading 'S99'"),
        (("U1", "x"), "no standard but unknown"),
        (("S1", " "), "needs a reason"),
    ],
)
def test_a_wrong_exclusion_before_the_fit_is_refused(ruled, exclusion, words):
    path = ruled.file("day.csv", header_block(day()))
    with pytest.raises(CalibError, match=words):
        ruled.laboratory.log(path, exclusions=(exclusion,))


def test_a_method_without_the_rule_leaves_nothing_out(bench):
    record = bench.log(day(S6=1.5))
    assert record.evaluation.verdict.decision == "rejected"
    assert not any(s.excluded for s in record.evaluation.standards)


def test_a_later_correction_starts_the_rule_anew(ruled):
    ruled.log(day(S6=1.5))
    record = ruled.laboratory.exclude(1, ["#6"], reason="bubble", reason_class="assignable cause")
    assert [s.reason for s in record.evaluation.standards if s.excluded] == ["bubble"]


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        ('"most deviant first"', '"any"', "line 21: exclusion.rule = 'any' is unknown"),
        ('rule = "most deviant first"', "most = 1", r"line 20: \[exclusion\] needs rule"),
        ('first"\n', 'first"\nmost = 6\n', "line 22: exclusion.most = 6 would leave out as many"),
        ('first"\n', 'first"\nmost = 0.5\n', "exclusion.most = 0.5 must be a whole number"),
        ('first"\n', 'first"\nwhole_levels = 1\n', "must be true or false"),
        ('first"\n', 'first"\nlimit = 1\n', "unknown key 'exclusion.limit'"),
        (
            "standards_passing = 0.75\n",
            "",
            "line 19: .exclusion. needs the acceptance limit standards_passing",
        ),
    ],
)
def test_a_wrong_rule_is_refused_with_its_line(old, new, words):
    with pytest.raises(CalibError, match=words):
        read_definition(WITH_RULE.replace(old, new).replace("levels_passing = 6\n", "levels_passing = 6\n"))
