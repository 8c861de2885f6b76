import math

import pytest
from made_evidence import evidence, limits, standard

from calib.acceptance import JudgedCheck, criteria_from, judge

GOOD = tuple(standard(x) for x in (1, 2, 5, 10))
JUST_OUTSIDE = 1 + 5e-12


def result(key, limit, standards=GOOD, **changes):
    criteria = criteria_from(limits(relative_error=0.15, **{key: limit}))
    verdict = judge(evidence(standards, **changes), criteria)
    return next(r for r in verdict.criteria if r.id == key)


@pytest.mark.parametrize(
    ("observed", "passed"), [(2.0, True), (2.0 * JUST_OUTSIDE, False), (math.nan, False)]
)
def test_residual_sd(observed, passed):
    assert result("residual_sd", 2.0, residual_sd=observed).passed is passed


@pytest.mark.parametrize(
    ("blanks", "passed", "observed"),
    [
        ((0.05, 0.01), True, 0.05),
        ((0.01, 0.05 * JUST_OUTSIDE), False, 0.05 * JUST_OUTSIDE),
        ((-0.9, 0.02), True, 0.02),
        ((0.01, math.nan), False, None),
    ],
)
def test_the_largest_blank_is_judged(blanks, passed, observed):
    answer = result("blank", 0.05, blanks=blanks)
    assert (answer.passed, answer.observed) == (passed, observed)


def test_a_run_without_blank_passes_and_says_so():
    answer = result("blank", 0.05)
    assert (answer.passed, answer.observed, answer.detail) == (True, None, "no blank in this run")


CHECKS = [("check_recovery", "check"), ("first_check_recovery", "first-check")]


@pytest.mark.parametrize(("key", "role"), CHECKS)
@pytest.mark.parametrize(
    ("found", "passed"),
    [(5.5, True), (4.5, True), (5.5 + 1e-9, False), (4.5 - 1e-9, False), (math.nan, False)],
)
def test_every_check_of_the_role_is_judged(key, role, found, passed):
    checks = (JudgedCheck("C1", role, 5.0, 5.0), JudgedCheck("C2", role, 5.0, found))
    assert result(key, 0.10, checks=checks).passed is passed


@pytest.mark.parametrize(("key", "role"), CHECKS)
def test_a_check_of_the_other_role_is_not_judged(key, role):
    other = "first-check" if role == "check" else "check"
    answer = result(key, 0.10, checks=(JudgedCheck("C1", other, 5.0, 50.0),))
    assert (answer.passed, answer.observed) == (True, None)
    assert answer.detail == f"no {'check standard' if role == 'check' else 'first check'} in this run"


def test_a_failing_check_is_named_with_level_and_deviation():
    answer = result("check_recovery", 0.10, checks=(JudgedCheck("C1", "check", 5.0, 4.2),))
    assert answer.detail == "beyond the limit: C1 at 5 ug/L: -16.0 %"
    assert answer.observed == pytest.approx(0.16)


def test_a_check_at_level_zero_has_no_recovery_and_fails():
    answer = result("check_recovery", 0.10, checks=(JudgedCheck("C0", "check", 0.0, 0.1),))
    assert (answer.passed, answer.observed) == (False, None)


@pytest.mark.parametrize(("limit", "passed"), [(1, True), (0, False)])
def test_saturated_standards_in_the_fit_are_counted(limit, passed):
    standards = (*GOOD, standard(20, saturated=True), standard(50, saturated=True, excluded=True))
    answer = result("saturated_standards", limit, standards)
    assert (answer.passed, answer.observed, answer.detail) == (passed, 1, "saturated: S20 at 20 ug/L")


def test_saturation_is_judged_without_being_asked_for():
    verdict = judge(
        evidence((*GOOD, standard(20, saturated=True))), criteria_from(limits(relative_error=0.15))
    )
    assert verdict.decision == "rejected"


@pytest.mark.parametrize(
    "code",
    [
        "not-converged",
        "not-identifiable",
        "too-few-levels",
        "at-bound",
        "no-residual-freedom",
        "no-scatter",
        "flat",
    ],
)
def test_an_unusable_curve_is_rejected_whatever_the_limits(code):
    verdict = judge(evidence(GOOD, findings=((code, "said in words"),)), ())
    assert verdict.decision == "rejected"
    assert verdict.reasons == ("the fit converged, and nothing forbids the use of its curve: said in words",)


def test_a_fit_that_did_not_converge_is_rejected_even_without_a_finding():
    assert judge(evidence(GOOD, converged=False), ()).decision == "rejected"


def test_other_findings_do_not_reject():
    findings = (("asymptote-not-reached", "the upper plateau is not covered"),)
    assert judge(evidence(GOOD, findings=findings), ()).decision == "accepted"
