"""Bracketing, dilutions and the multirule: the pure rules."""

import math

import pytest

from calib.acceptance.bracketing import Bracket, Injection, brackets
from calib.acceptance.dilutions import MEAN, DilutedValue, judge_dilutions
from calib.acceptance.multirule import multirule


def sequence(text):
    """'c' a passing check, 'H' and 'L' one that failed high or low, 's' a sample, '.' anything else."""
    kinds = {
        "c": ("check", 0.0, True),
        "H": ("check", 0.2, False),
        "L": ("check", -0.2, False),
        "s": ("sample", 0.0, True),
        ".": ("other", 0.0, True),
    }
    return [Injection(key, *kinds[letter]) for key, letter in enumerate(text)]


def closed(text, every=None):
    found = brackets(sequence(text), every)
    return "".join("y" if found[key].closed else "n" for key in sorted(found))


# Standard Methods 2020 (read): samples lie between passing checks; after the last passing one they are run again.
@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("cssc", "yy"),
        (".c.ss.c", "yy"),
        ("cssLssc", "nnnn"),
        ("csscssL", "yynn"),
        ("csscss", "yynn"),
        ("ssc", "nn"),
        ("ss", "nn"),
        ("cLsc", "n"),
    ],
)
def test_a_sample_lies_between_two_passing_checks(text, expected):
    assert closed(text) == expected


@pytest.mark.parametrize(("samples", "expected"), [(10, "y" * 10), (11, "n" * 11)])
def test_no_more_than_so_many_samples_lie_between_two_checks(samples, expected):
    assert closed("c" + "s" * samples + "c", every=10) == expected


def test_a_bracket_that_failed_high_only_says_so():
    found = brackets(sequence("csHsL"))
    assert found[1] == Bracket(closed=False, failed_high=True)
    assert found[3] == Bracket(closed=False, failed_high=False)


# One sample at several dilutions.


def values(*pairs):
    return [DilutedValue(dilution, value, inside) for dilution, value, inside in pairs]


def test_the_least_diluted_value_inside_the_range_counts():
    found = judge_dilutions(values((1, 50.0, False), (10, 60.0, True), (100, 63.0, True)), 0.2)
    assert (found.counts, found.value, found.agree, found.hook) == ((10,), 60.0, True, False)


def test_the_mean_of_agreeing_dilutions_may_count():
    found = judge_dilutions(values((10, 60.0, True), (100, 64.0, True)), 0.2, MEAN)
    assert (found.counts, found.value) == ((10, 100), 62.0)


@pytest.mark.parametrize(("higher", "agree"), [(110.0, True), (110.6, False)])
def test_dilutions_agree_up_to_the_limit(higher, agree):
    # Spread of 100 and 110 relative to their mean: 9.52 %.
    found = judge_dilutions(values((1, 100.0, True), (10, higher, True)), 10 / 105)
    assert found.agree is agree
    assert math.isnan(found.value) is not agree


def test_a_value_that_rises_with_the_dilution_shows_a_hook_and_the_diluted_ones_count():
    found = judge_dilutions(values((1, 20.0, True), (10, 95.0, True), (100, 100.0, True)), 0.2)
    assert (found.hook, found.agree, found.counts, found.value) == (True, False, (10,), 95.0)


def test_two_dilutions_that_show_a_hook_leave_nothing_that_counts():
    found = judge_dilutions(values((1, 20.0, True), (10, 100.0, True)), 0.2)
    assert (found.hook, found.counts) == (True, ())


def test_a_value_that_falls_with_the_dilution_is_no_hook():
    found = judge_dilutions(values((1, 100.0, True), (10, 20.0, True)), 0.2)
    assert (found.hook, found.agree, found.counts) == (False, False, ())


def test_values_outside_the_range_never_count():
    assert judge_dilutions(values((1, 500.0, False)), 0.2).counts == ()


# The multirule, 1981 (as quoted): each rule just firing and just not.


def fired(*runs, count=10):
    return {
        signal.rule
        for signal in multirule([[("low", z)] if isinstance(z, float) else z for z in runs], count)
    }


@pytest.mark.parametrize(
    ("runs", "rules"),
    [
        ((2.0,), set()),
        ((2.1,), {"1-2s"}),
        ((-3.1,), {"1-2s", "1-3s"}),
        ((2.1, 2.1), {"1-2s", "2-2s"}),
        ((2.1, -2.1), {"1-2s"}),
        ((1.1, 1.1, 1.1), set()),
        ((1.1, 1.1, 1.1, 1.1), {"4-1s"}),
        ((1.1, 1.1, 0.9, 1.1), set()),
        (tuple([0.1] * 9), set()),
        (tuple([0.1] * 10), {"10-x"}),
        (tuple([-0.1] * 10), {"10-x"}),
        (([("low", 2.1), ("high", -2.1)],), {"1-2s", "R-4s"}),
        (([("low", 2.1), ("high", 2.1)],), {"1-2s", "2-2s"}),
        (([("low", 2.1)], [("high", -2.1)]), {"1-2s"}),
    ],
)
def test_the_multirule(runs, rules):
    assert fired(*runs) == rules


def test_the_row_of_the_last_rule_has_variants():
    assert fired(*([0.1] * 8), count=8) == {"10-x"}
