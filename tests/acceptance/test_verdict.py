import math
import random
from dataclasses import replace

from hypothesis import given
from hypothesis import strategies as st
from made_evidence import evidence, limits, standard

from calib.acceptance import JudgedCheck, criteria_from, judge

METHOD = limits(
    relative_error=0.15,
    relative_error_lowest=0.20,
    relative_error_highest=0.25,
    standards_passing=0.75,
    levels_passing=3,
    minimum_levels=3,
    relative_standard_error=0.2,
    residual_sd=2.0,
    blank=0.1,
    check_recovery=0.1,
    first_check_recovery=0.1,
)
CRITERIA = criteria_from(METHOD)
GOOD = tuple(standard(x) for x in (1, 2, 5, 10))


def test_all_pass():
    verdict = judge(evidence(GOOD), CRITERIA)
    assert (verdict.decision, verdict.reasons) == ("accepted", ())
    assert [r.id for r in verdict.criteria] == [
        "curve-usable",
        "standards_passing",
        "levels_passing",
        "minimum_levels",
        "relative_standard_error",
        "residual_sd",
        "saturated_standards",
        "blank",
        "first_check_recovery",
        "check_recovery",
    ]


def test_a_judged_standard_left_out_makes_it_accepted_with_exclusions():
    assert (
        judge(evidence((*GOOD, standard(20, excluded=True))), CRITERIA).decision == "accepted with exclusions"
    )


def test_leaving_out_an_anchor_is_no_exclusion_of_a_judged_standard():
    anchor = standard(20, role="anchor", excluded=True)
    assert judge(evidence((*GOOD, anchor)), CRITERIA).decision == "accepted"


def test_one_failing_criterion_rejects_and_is_told_in_figures():
    verdict = judge(evidence(GOOD, blanks=(0.3,)), CRITERIA)
    assert verdict.decision == "rejected"
    assert verdict.reasons == ("largest blank at most 0.1 ug/L: largest of 1 blank: 0.3 ug/L",)


def test_a_limit_that_warns_rejects_nothing_and_is_told():
    method = METHOD | {"blank": replace(METHOD["blank"], warns=True)}
    verdict = judge(evidence(GOOD, blanks=(0.3,)), criteria_from(method))
    assert (verdict.decision, verdict.reasons) == ("accepted", ())
    (told,) = [r for r in verdict.criteria if not r.passed]
    assert (told.id, told.warns, told.rejects) == ("blank", True, False)
    assert told.remedy.startswith("find where the analyte in the blank comes from")


def test_r_squared_is_shown_and_not_judged_without_a_limit():
    poor, undefined = evidence(GOOD, r_squared=0.1), evidence(GOOD, r_squared=math.nan)
    assert (judge(poor, CRITERIA).decision, judge(poor, CRITERIA).r_squared) == ("accepted", 0.1)
    assert judge(undefined, CRITERIA).r_squared is None


def test_without_any_standard_there_is_no_calibrated_range():
    verdict = judge(evidence(()), CRITERIA)
    assert (verdict.decision, verdict.lowest, verdict.highest) == ("rejected", None, None)


READINGS = st.lists(
    st.builds(
        standard,
        st.sampled_from([0.0, 0.5, 1.0, 2.0, 5.0, 10.0]),
        st.floats(-0.6, 0.6) | st.just(math.nan),
        label=st.sampled_from("ABCDEFGH"),
        role=st.sampled_from(["standard", "standard", "anchor"]),
        excluded=st.booleans(),
        saturated=st.booleans(),
    ),
    max_size=16,
).map(lambda rows: [replace(s, response=float(k)) for k, s in enumerate(rows)])
CHECKS = st.lists(
    st.builds(
        JudgedCheck,
        st.sampled_from("XYZ"),
        st.sampled_from(["check", "first-check"]),
        st.just(2.0),
        st.floats(1, 3),
    ),
    max_size=5,
)


@given(READINGS, CHECKS, st.lists(st.floats(0, 0.2), max_size=4), st.randoms(use_true_random=False))
def test_the_order_of_the_rows_does_not_matter(standards, checks, blanks, shuffler: random.Random):
    given_order = evidence(standards, checks=tuple(checks), blanks=tuple(blanks))
    for rows in (standards, checks, blanks):
        shuffler.shuffle(rows)
    shuffled = evidence(standards, checks=tuple(checks), blanks=tuple(blanks))
    assert judge(given_order, CRITERIA) == judge(shuffled, CRITERIA)


@given(READINGS, st.floats(1e-6, 1e6))
def test_scaling_the_concentrations_does_not_change_the_decision(standards, factor):
    method = limits(relative_error=0.15, relative_error_lowest=0.2, standards_passing=0.5, minimum_levels=2)
    scaled = [
        replace(s, level=s.level * factor, back_calculated=s.back_calculated * factor) for s in standards
    ]
    decisions = {judge(evidence(rows), criteria_from(method)).decision for rows in (standards, scaled)}
    assert len(decisions) == 1


@given(READINGS)
def test_no_verdict_holds_nan(standards):
    verdict = judge(evidence(standards), CRITERIA)
    assert all(r.observed is None or math.isfinite(r.observed) for r in verdict.criteria)
