import math

import pytest
from made_evidence import evidence, limits, standard

from calib.acceptance import CRITERIA, Limit, criteria_from, judge
from calib.errors import MethodError


def test_each_line_of_the_mapping_names_its_own_class():
    assert {key: criterion.key for key, criterion in CRITERIA.items()} == {key: key for key in CRITERIA}


def test_an_unknown_key_is_named_beside_the_allowed_ones():
    with pytest.raises(MethodError, match=r"'beauty'; allowed are relative_error, .*saturated_standards"):
        criteria_from(limits(relative_error=0.15, beauty=0.99))


@pytest.mark.parametrize(
    "others", [{}, {"residual_sd": 2.0}, {"r_squared": 0.999}, {"minimum_levels": 5, "check_recovery": 0.1}]
)
def test_limits_without_a_relative_error_measure_are_refused(others):
    # The NELAC Institute, volume 1 module 4, 1.7.1.1 (read as quoted): such a measure is compulsory.
    with pytest.raises(MethodError, match="no relative-error measure"):
        criteria_from(limits(**others))


@pytest.mark.parametrize("measure", ["relative_error", "relative_standard_error"])
def test_either_measure_is_enough(measure):
    assert len(criteria_from(limits(**{measure: 0.2}))) == 2


@pytest.mark.parametrize(
    ("method", "words"),
    [
        ({"relative_error": 0.2, "relative_error_lowest": 0.1}, r"lowest \(10 %\) is narrower .*\(20 %\)"),
        ({"relative_error": 0.2, "relative_error_highest": 0.1}, "relative_error_highest .* is narrower"),
        ({"relative_error": 0.2, "standards_passing": 75}, "75 is no share"),
        ({"relative_error": -0.2}, "relative_error: the limit -0.2 is not"),
        ({"relative_error": math.nan}, "relative_error: the limit nan is not"),
        ({"relative_error": 0.2, "blank": math.inf}, "blank: the limit inf is not"),
        ({"relative_error": 0.2, "minimum_levels": 5.5}, "5.5 is no count"),
        ({"relative_standard_error": 0.2, "standards_passing": 0.75}, "standards_passing needs the limit"),
        ({"relative_standard_error": 0.2, "levels_passing": 6}, "levels_passing needs the limit"),
        ({"relative_standard_error": 0.2, "relative_error_lowest": 0.3}, "relative_error_lowest needs"),
        (
            {"relative_error": 0.2, "controls_passing": 0.6},
            "controls_passing needs the limit control_recovery",
        ),
        ({"relative_error": 0.2, "control_levels": 3}, "control_levels needs the limit control_recovery"),
    ],
)
def test_contradictions_are_refused_in_one_line_of_words(method, words):
    with pytest.raises(MethodError, match=words) as refusal:
        criteria_from(limits(**method))
    assert "\n" not in str(refusal.value)


def test_end_limits_as_wide_as_the_middle_one_are_allowed():
    criteria_from(limits(relative_error=0.2, relative_error_lowest=0.2, relative_error_highest=0.2))


def test_a_result_says_where_its_limit_comes_from_and_how_far_it_was_checked():
    mixed = {
        "relative_error": Limit(0.15, "method toxin-plate version 3", "method"),
        "minimum_levels": Limit(1, "a standard, 2020, section 4", "from memory"),
    }
    verdict = judge(evidence([standard(1), standard(2)]), criteria_from(mixed))
    sources = {r.id: r.source for r in verdict.criteria}
    assert sources["relative_error"] == "method toxin-plate version 3"
    assert sources["minimum_levels"] == "a standard, 2020, section 4 [from memory]"


def test_changing_the_limits_afterwards_does_not_change_the_criteria():
    method = limits(relative_error=0.15)
    criteria = criteria_from(method)
    method.clear()
    assert judge(evidence([standard(1)]), criteria).decision == "accepted"
