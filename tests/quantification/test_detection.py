"""Detection limits by their stated procedures, against printed and calculated figures."""

import math

import numpy as np
import pytest

from calib.curves.quantiles import student_quantile
from calib.errors import InputError
from calib.quantification.detection import blank_limits, line_limits, method_detection_limit
from calib.quantification.specification import Specification, decide, decide_below

SPIKES = [1.9, 2.2, 2.05, 1.8, 2.3, 2.1, 1.95]
BLANKS = [0.1, -0.2, 0.3, 0.0, 0.25, -0.1, 0.05]


def test_the_larger_of_spikes_and_blanks_is_the_method_detection_limit():
    # 40 CFR 136, Appendix B, revision 2; calculated with scipy 1.17.1 for this laboratory's test vectors.
    found = method_detection_limit(SPIKES, BLANKS)
    assert found.of_spikes == pytest.approx(0.54756, abs=5e-6)
    assert found.of_blanks == pytest.approx(0.61953, abs=5e-6)
    assert found.value == found.of_blanks


# 40 CFR 136, Appendix B, revision 2, table of t (read).
@pytest.mark.parametrize(
    ("n", "t"),
    {
        7: 3.143,
        8: 2.998,
        9: 2.896,
        10: 2.821,
        11: 2.764,
        16: 2.602,
        21: 2.528,
        26: 2.485,
        31: 2.457,
        61: 2.390,
    }.items(),
)
def test_the_printed_quantiles(n, t):
    assert float(student_quantile(n - 1, 0.99)) == pytest.approx(t, abs=5.1e-4)


# The branches of the blanks (from memory).
@pytest.mark.parametrize(
    ("blanks", "expected"),
    [((), None), ((None, None), None), ((0.1, None, 0.3), 0.3), ((-0.2, -0.2, -0.2), 0.0)],
)
def test_blanks_without_numbers(blanks, expected):
    found = method_detection_limit(SPIKES, blanks).of_blanks
    assert found == (None if expected is None else pytest.approx(expected, abs=1e-12))


def test_limit_of_blank_and_limit_of_detection():
    found = blank_limits([0.0, 0.2, 0.1, 0.1], [0.5, 0.7])
    blank = 0.1 + 1.645 * np.std([0, 0.2, 0.1, 0.1], ddof=1)
    assert found.of_blank == pytest.approx(blank)
    assert found.of_detection == pytest.approx(blank + 1.645 * math.sqrt(0.02))


# Line through x = 1 … 10, y = .105 … .911; calculated with scipy 1.17.1 for this laboratory's test vectors.
X, Y = (1.0, 2.0, 4.0, 6.0, 8.0, 10.0), (0.105, 0.205, 0.398, 0.580, 0.752, 0.911)


def test_the_critical_value_of_a_line():
    # ISO 11843-2 formula (from memory).
    found = line_limits(X, Y)
    assert found.critical == pytest.approx(0.40264, abs=5e-6)
    assert found.detectable == 2 * found.critical


def test_a_well_known_line_has_the_limits_of_currie():
    """With many standards far out and K = 1 the limits are 1.645 and 3.29 s/b (Currie 1995, from memory)."""
    rng = np.random.default_rng(3)
    x = np.tile([0.0, 100.0], 20000)
    found = line_limits(x, x + rng.normal(0, 1.0, x.size))
    assert found.critical == pytest.approx(1.645, rel=0.02)
    assert found.detectable == pytest.approx(3.29, rel=0.02)


@pytest.mark.parametrize(
    ("call", "words"),
    [
        (lambda: method_detection_limit([1.0] * 6), "6 spiked samples: .* at least 7"),
        (lambda: method_detection_limit([math.nan] * 7), "nan is no result"),
        (lambda: blank_limits([1.0], [1.0, 2.0]), "1 blanks: a standard deviation"),
        (lambda: line_limits([1, 2], [1, 2]), "at least 3"),
        (lambda: line_limits([1, 1, 1], [1, 2, 3]), "at two levels"),
        (lambda: line_limits([1, 2, 3], [1, 1, 1]), "no slope"),
        (lambda: line_limits([1, 2, 3], [1, 2, 3.1], replicates=0), "give 1 or more"),
    ],
)
def test_what_cannot_be_computed_is_refused_in_words(call, words):
    with pytest.raises(InputError, match=words):
        call()


# Decision rules (JCGM 106:2012 and ILAC-G8:09/2019, from memory), upper limit 10, U = 1.
@pytest.mark.parametrize(
    ("rule", "passing", "failing"),
    [
        ("simple acceptance", 10.0, 10.001),
        ("guarded acceptance", 9.0, 9.001),
        ("guarded rejection", 11.0, 11.001),
    ],
)
def test_each_rule_has_its_edge(rule, passing, failing):
    upper = Specification(None, 10.0, rule)
    assert [decide(upper, value, 1.0, 1.0) for value in (passing, failing)] == ["pass", "fail"]
    lower = Specification(-10.0, None, rule)
    assert [decide(lower, -value, 1.0, 1.0) for value in (passing, failing)] == ["pass", "fail"]


def test_a_lopsided_interval_guards_on_the_side_of_the_limit():
    upper = Specification(None, 10.0, "guarded acceptance")
    assert decide(upper, 8.0, 5.0, 2.0) == "pass"
    assert decide(upper, 8.0, 0.1, 2.1) == "fail"
    assert decide(upper, 8.0, 0.1, math.inf) == "fail"
    assert decide(Specification(None, 10.0, "simple acceptance"), 8.0, 0.1, math.inf) == "pass"


def test_a_result_below_a_limit_passes_only_where_the_limit_says_so():
    assert decide_below(Specification(None, 10.0, "simple acceptance"), 0.5) == "pass"
    assert decide_below(Specification(None, 0.1, "simple acceptance"), 0.5) == "undecided"
    assert decide_below(Specification(1.0, None, "simple acceptance"), 0.5) == "fail"
