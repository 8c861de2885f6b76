"""Control samples, and what a run must hold: the tables of counts, and pairs just inside and outside."""

import math

import pytest
from made_evidence import evidence, limits, standard

from calib.acceptance import JudgedCheck, criteria_from, judge

GOOD = [standard(x) for x in (1, 2, 5, 10)]
TWO_THIRDS = {"control_recovery": 0.15, "controls_passing": 2 / 3, "controls_passing_each_level": 0.5}


def control(level, deviation=0.0, role="control", label=None):
    return JudgedCheck(label or f"C{level:g}", role, level, level * (1 + deviation))


def result(key, checks=(), method=None, **changes):
    verdict = judge(
        evidence(GOOD, checks=tuple(checks), **changes),
        criteria_from(limits(relative_error=9.0, **(method or {}))),
    )
    return next(r for r in verdict.criteria if r.id == key)


def controls(n, failing):
    """So many controls over three levels, the failing ones spread evenly."""
    return [control((2, 5, 9)[i % 3], 0.5 if i < failing else 0.0) for i in range(n)]


# ICH M10, 2022, 3.3.2: two thirds of all (as quoted). The counts are calculated.
@pytest.mark.parametrize(("n", "required"), {6: 4, 8: 6, 9: 6, 10: 7, 12: 8, 18: 12}.items())
def test_two_thirds_of_the_controls_must_pass(n, required):
    answers = [result("controls_passing", controls(n, n - k), TWO_THIRDS) for k in (required, required - 1)]
    assert [a.passed for a in answers] == [True, False]
    assert answers[1].remedy.startswith(f"{required} of {n} controls would have to pass")


def test_a_level_without_a_passing_control_rejects_though_two_thirds_pass():
    # The edge case of the rule: 4 of 6 pass, one level at 0 of 2.
    checks = [control(level, 0.5 if level == 2 else 0.0) for level in (2, 2, 5, 5, 9, 9)]
    verdict = judge(
        evidence(GOOD, checks=tuple(checks)), criteria_from(limits(relative_error=9.0, **TWO_THIRDS))
    )
    assert {c.id: c.passed for c in verdict.criteria if c.id.startswith("controls")} == {
        "controls_passing": True,
        "controls_passing_each_level": False,
    }
    assert verdict.decision == "rejected"


def test_half_of_a_level_is_enough():
    checks = [control(2, 0.5), control(2), control(5), control(5), control(9), control(9)]
    assert result("controls_passing_each_level", checks, TWO_THIRDS).passed


@pytest.mark.parametrize(
    ("deviation", "passed"), [(0.15, True), (-0.15, True), (0.1501, False), (math.nan, False)]
)
def test_a_control_on_its_limit_passes(deviation, passed):
    assert result("control_recovery", [control(5, deviation)], {"control_recovery": 0.15}).passed is passed


def test_a_share_takes_the_place_of_the_limit_of_every_single_control():
    verdict = judge(evidence(GOOD), criteria_from(limits(relative_error=9.0, **TWO_THIRDS)))
    assert "control_recovery" not in {c.id for c in verdict.criteria}


@pytest.mark.parametrize(("levels", "passed"), [((2, 5, 9), True), ((0.5, 5, 9), False), ((2, 5, 11), False)])
def test_three_control_levels_remain_inside_the_range(levels, passed):
    method = {"control_recovery": 0.15, "control_levels": 3}
    assert result("control_levels", [control(x) for x in levels], method).passed is passed


@pytest.mark.parametrize(
    ("met", "passed"), [((2, 9), True), ((2.1, 8.9), False), ((2.1, 9), True), (None, True)]
)
def test_two_control_levels_lie_among_the_concentrations_of_the_samples(met, passed):
    method = {"control_recovery": 0.15, "controls_in_sample_range": 2}
    checks = [control(x) for x in (2, 5, 9)]
    assert result("controls_in_sample_range", checks, method, sample_range=met).passed is passed


@pytest.mark.parametrize(
    ("key", "role"),
    [
        ("minimum_blanks", "blank"),
        ("minimum_zeros", "zero"),
        ("minimum_checks", "check"),
        ("minimum_first_checks", "first-check"),
        ("minimum_controls", "control"),
    ],
)
def test_a_run_holds_what_the_method_asks_for(key, role):
    answers = [result(key, method={key: 2}, counts={role: n}) for n in (2, 1, 0)]
    assert [a.passed for a in answers] == [True, False, False]
    assert answers[2].remedy.startswith("measure 2 ")


def test_controls_are_counted_against_the_samples():
    answers = [
        result(
            "minimum_control_share",
            method={"minimum_control_share": 0.05},
            counts={"unknown": 120, "control": n},
        )
        for n in (6, 5)
    ]
    assert [a.passed for a in answers] == [True, False]


def test_the_check_right_after_the_curve_may_have_a_limit_of_its_own():
    # EPA 200.7, 9.3.4 (from memory): 5 % right after the calibration, then 10 %.
    checks = [control(5, 0.06, "check", "K1"), control(5, 0.09, "check", "K2")]
    method = {"opening_check_recovery": 0.05, "check_recovery": 0.10}
    opening = result("opening_check_recovery", checks, method)
    assert not opening.passed
    assert opening.detail == "beyond the limit: K1 at 5 ug/L: +6.0 %"
    assert opening.remedy == "K1 would have to read between 4.75 and 5.25 ug/L"
    assert result("check_recovery", checks, method).passed


@pytest.mark.parametrize(("share", "passed"), [(0.2, True), (0.2001, False), (-0.5, True), (math.nan, False)])
def test_a_carry_over_blank_holds_at_most_a_share_of_the_lowest_standard(share, passed):
    assert result("carry_over", method={"carry_over": 0.2}, carry_over=(share,)).passed is passed


@pytest.mark.parametrize(("blank", "passed"), [(0.05, True), (0.0501, False), (math.nan, False)])
def test_a_blank_is_judged_by_the_reporting_limit(blank, passed):
    method, facts = {"blank_share": 0.5}, {"blanks": (blank,)}
    assert result("blank_share", method=method, reporting_limit=0.1, **facts).passed is passed
    assert result("blank_share", method=method, **facts).observed is None
