import math

import pytest
from made_evidence import evidence, limits, off_curve, standard

from calib.acceptance import criteria_from, judge
from calib.acceptance.standard_criteria import relative_standard_error

JUST_INSIDE = 1 + 5e-13
JUST_OUTSIDE = 1 + 5e-12


def result(key, standards, method, **changes):
    verdict = judge(evidence(standards, **changes), criteria_from(limits(**method)))
    return next(r for r in verdict.criteria if r.id == key)


@pytest.mark.parametrize("sign", [1, -1])
@pytest.mark.parametrize(("factor", "passed"), [(1.0, True), (JUST_INSIDE, True), (JUST_OUTSIDE, False)])
def test_a_relative_error_on_the_limit_passes_and_just_beyond_fails(sign, factor, passed):
    answer = result(
        "relative_error", [standard(1), standard(5, sign * 0.15 * factor)], {"relative_error": 0.15}
    )
    assert answer.passed is passed
    assert answer.observed == pytest.approx(0.15, abs=1e-9)


@pytest.mark.parametrize(
    ("key", "level"), [("relative_error_lowest", 1), ("relative_error_highest", 9), ("relative_error", 5)]
)
@pytest.mark.parametrize(("factor", "passed"), [(1.0, True), (JUST_OUTSIDE, False)])
def test_end_levels_have_their_own_limits(key, level, factor, passed):
    method = {"relative_error": 0.20, "relative_error_lowest": 0.25, "relative_error_highest": 0.30}
    standards = [standard(x, method[key] * factor if x == level else 0.0) for x in (1, 5, 9)]
    verdict = judge(evidence(standards), criteria_from(limits(**method)))
    assert [r.id for r in verdict.criteria if not r.passed] == ([] if passed else [key])


def test_end_levels_without_limits_of_their_own_fall_back_to_the_middle_one():
    answer = result("relative_error", [standard(1, 0.16), standard(5), standard(9)], {"relative_error": 0.15})
    assert not answer.passed
    assert answer.what == "relative error of each standard at most 15 %"
    assert answer.detail == "beyond the limit: S1 at 1 ug/L: +16.0 %"


@pytest.mark.parametrize(("error", "decision"), [(0.15, "accepted with exclusions"), (0.18, "rejected")])
def test_the_range_moves_inwards_when_the_lowest_level_is_lost_and_the_next_keeps_its_own_limit(
    error, decision
):
    # ICH M10, 2022, 3.3.2 (from memory).
    standards = [standard(1, 0.5, excluded=True), standard(2, error), standard(5), standard(9)]
    method = {"relative_error": 0.15, "relative_error_lowest": 0.20}
    verdict = judge(evidence(standards), criteria_from(limits(**method)))
    assert verdict.decision == decision
    assert (verdict.lowest, verdict.highest) == (2, 9)


def test_a_standard_without_back_calculated_value_fails():
    answer = result("relative_error", [standard(1), off_curve(9)], {"relative_error": 0.15})
    assert (answer.passed, answer.observed) == (False, None)
    assert answer.detail == "beyond the limit: S9 at 9 ug/L: no back-calculated value"


def test_anchors_and_the_zero_level_are_never_judged_by_relative_error():
    standards = [off_curve(0.0), standard(0.1, 3.0, role="anchor"), standard(1), standard(5)]
    verdict = judge(evidence(standards), criteria_from(limits(relative_error=0.15)))
    assert verdict.decision == "accepted"
    assert (verdict.lowest, verdict.highest) == (1, 5)


def test_a_failing_figure_is_never_shown_as_if_it_were_on_the_limit():
    answer = result("relative_error", [standard(1, -0.150004)], {"relative_error": 0.15})
    assert answer.detail.endswith("S1 at 1 ug/L: -15.0004 %")


def test_no_standard_in_the_fit_fails_every_measure():
    for method in (
        {"relative_error": 0.15, "relative_standard_error": 0.2},
        {"relative_error": 0.15, "standards_passing": 0.75, "relative_standard_error": 0.2},
    ):
        verdict = judge(evidence([standard(0.0)]), criteria_from(limits(**method)))
        measures = set(method) - ({"relative_error"} if "standards_passing" in method else set())
        assert {r.id for r in verdict.criteria if not r.passed} == measures


def test_where_a_share_may_fail_one_standard_beyond_its_limit_rejects_nothing():
    standards = [standard(x, 0.5 if x == 2 else 0.0) for x in range(1, 9)]
    alone = judge(evidence(standards), criteria_from(limits(relative_error=0.15)))
    method = limits(relative_error=0.15, relative_error_lowest=0.2, standards_passing=0.75)
    shared = judge(evidence(standards), criteria_from(method))
    assert (alone.decision, shared.decision) == ("rejected", "accepted")
    (share,) = [r for r in shared.criteria if r.id == "standards_passing"]
    assert "(15 %, lowest level 20 %)" in share.what
    assert share.detail == "7 of 8 standards (87.5 %); not within: S2 at 2 ug/L: +50.0 %"


def test_many_failing_standards_are_counted_after_the_four_worst():
    standards = [standard(x, 0.2 + 0.01 * x) for x in range(1, 9)]
    answer = result("relative_error", standards, {"relative_error": 0.15})
    assert answer.detail.startswith("beyond the limit: S8 at 8 ug/L: +28.0 %, S7")
    assert answer.detail.endswith(" and 4 more")


COUNTS = {6: 6, 7: 6, 8: 6, 9: 7, 10: 8, 12: 9}
"""Standards of a run, one reading a level, and how many must pass where three quarters and six levels
are asked for. Calculated: max(6, ceil(0.75 n)). The rule: ICH M10, 2022, 3.2.4 (as quoted)."""


@pytest.mark.parametrize(("n", "required"), COUNTS.items())
@pytest.mark.parametrize("lost", ["excluded", "failing"])
def test_the_required_number_of_standards_passes_and_one_less_does_not(n, required, lost):
    change = {"excluded": True} if lost == "excluded" else {"relative_error": 0.9}
    method = {"relative_error": 0.15, "standards_passing": 0.75, "levels_passing": 6}
    for passing in (required, required - 1):
        standards = [standard(x, **(change if x > passing else {})) for x in range(1, n + 1)]
        verdict = judge(evidence(standards), criteria_from(limits(**method)))
        assert (verdict.decision != "rejected") is (passing == required)


def test_excluded_readings_count_in_the_original_number():
    standards = [standard(x, excluded=x == 4) for x in (1, 2, 3, 4)]
    answer = result("standards_passing", standards, {"relative_error": 0.15, "standards_passing": 0.75})
    assert (answer.observed, answer.passed) == (0.75, True)
    assert answer.detail == "3 of 4 standards (75.0 %); not within: S4 at 4 ug/L: excluded"


@pytest.mark.parametrize(("limit", "passed"), [(0.75, True), (0.76, False)])
def test_the_passing_share_is_inclusive(limit, passed):
    standards = [standard(x, 0.5 if x == 2 else 0.0) for x in (1, 2, 3, 4)]
    method = {"relative_error": 0.15, "standards_passing": limit}
    assert result("standards_passing", standards, method).passed is passed


def test_a_share_of_thirds_is_not_lost_to_rounding():
    standards = [standard(x, 0.5 if x == 2 else 0.0) for x in (1, 2, 3)]
    method = {"relative_error": 0.15, "standards_passing": 2 / 3}
    assert result("standards_passing", standards, method).passed


@pytest.mark.parametrize(("bad", "passed"), [(1, True), (2, False)])
def test_a_level_passes_with_half_of_its_original_readings(bad, passed):
    standards = [standard(1), standard(1)] + [standard(2, excluded=k < bad, label=f"S2{k}") for k in range(2)]
    answer = result("levels_passing", standards, {"relative_error": 0.15, "levels_passing": 2})
    assert answer.passed is passed


def test_one_reading_in_three_does_not_make_a_level():
    standards = [standard(1), standard(5), standard(2), standard(2, 0.4), standard(2, 0.5)]
    answer = result("levels_passing", standards, {"relative_error": 0.15, "levels_passing": 3})
    assert (answer.observed, answer.passed) == (2, False)
    assert answer.detail == "2 passing levels; not passing: 2 ug/L"


@pytest.mark.parametrize(("limit", "passed"), [(3, True), (4, False)])
def test_minimum_levels_counts_distinct_levels_in_the_fit(limit, passed):
    standards = [
        standard(0.0),
        standard(1),
        standard(1),
        standard(2),
        standard(3),
        standard(4, excluded=True),
    ]
    standards.append(standard(0.1, role="anchor"))
    answer = result("minimum_levels", standards, {"relative_error": 0.15, "minimum_levels": limit})
    assert (answer.observed, answer.passed) == (3, passed)


# The NELAC Institute, Calculating Relative Standard Error (RSE), 6 April 2017: worked example of a linear
# calibration of five levels (read in copies of the text). Printed: the squared terms, and 12.83 %.
TNI_TRUE = (0.05, 0.5, 2.5, 5.0, 10.0)
TNI_MEASURED = (0.0582, 0.4396, 2.304, 4.876, 10.34)
TNI_SQUARES = (0.026896, 0.01459264, 0.00614656, 0.00061504, 0.001156)


def tni_standards():
    return [standard(x, found / x - 1) for x, found in zip(TNI_TRUE, TNI_MEASURED, strict=True)]


def test_relative_standard_error_of_the_published_example():
    standards = tni_standards()
    assert [s.relative_error**2 for s in standards] == pytest.approx(TNI_SQUARES, abs=1e-12)
    answer = result("relative_standard_error", standards, {"relative_standard_error": 0.20})
    assert answer.observed is not None
    assert round(100 * answer.observed, 2) == 12.83
    assert answer.detail == "12.8 % from 5 standards and 2 parameters"


def test_relative_standard_error_leaves_out_anchors_zero_and_excluded_readings():
    extra = [standard(0.0), standard(20, 0.9, excluded=True), standard(90, 0.9, role="anchor")]
    answer = result("relative_standard_error", tni_standards() + extra, {"relative_standard_error": 0.20})
    assert answer.observed is not None
    assert round(100 * answer.observed, 2) == 12.83


@pytest.mark.parametrize(("factor", "passed"), [(1.0, True), (1 / JUST_OUTSIDE, False)])
def test_relative_standard_error_limit_is_inclusive(factor, passed):
    exact = relative_standard_error((s.relative_error for s in tni_standards()), 3)
    method = {"relative_standard_error": exact * factor}
    assert result("relative_standard_error", tni_standards(), method).passed is passed


def test_relative_standard_error_needs_more_standards_than_parameters():
    answer = result(
        "relative_standard_error", tni_standards(), {"relative_standard_error": 0.2}, free_parameters=5
    )
    assert (answer.passed, answer.observed) == (False, None)
    assert "more standards are needed" in answer.detail


def test_relative_standard_error_fails_with_a_standard_off_the_curve():
    standards = [*tni_standards(), off_curve(20)]
    answer = result("relative_standard_error", standards, {"relative_standard_error": 0.2})
    assert (answer.passed, answer.observed) == (False, None)
    assert math.isnan(standards[-1].relative_error)
