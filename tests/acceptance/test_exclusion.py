"""The documented exclusion loop: counts, order of exclusion, and what it may never do."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from made_evidence import evidence, limits, standard

from calib.acceptance import ExclusionRule, criteria_from, exclude_failing, judge
from calib.acceptance.exclusion import step_in_words
from calib.acceptance.standard_criteria import governing_key, keeps

LIMITS = limits(
    relative_error=0.15,
    relative_error_lowest=0.20,
    standards_passing=0.75,
    levels_passing=6,
    minimum_levels=6,
)
RULE = ExclusionRule(0.75, 6)


class Line:
    """A straight line fitted by relative least squares, and the evidence of it; every call is kept."""

    def __init__(self, x, y, already_out=()):
        self.x, self.y, self.out = np.asarray(x, float), np.asarray(y, float), frozenset(already_out)
        self.calls = []

    def __call__(self, excluded):
        out = excluded | self.out
        kept = sorted((self.x[k], self.y[k]) for k in range(self.x.size) if k not in out)
        x, y = np.array(kept).T
        design = np.stack([1 / x, np.ones_like(x)], axis=1)
        intercept, slope = np.linalg.lstsq(design, y / x, rcond=None)[0]
        read = (self.y - intercept) / slope
        standards = [
            standard(a, back / a - 1, key=k, label=f"S{a:g}/{b:.6g}", response=b, excluded=k in out)
            for k, (a, b, back) in enumerate(zip(self.x, self.y, read, strict=True))
        ]
        found = evidence(standards)
        self.calls.append((excluded, found))
        return found


# Calculated, max(6, ceil(0.75 n)); the rule: ICH M10, 2022, 3.2.4 (as quoted).
@pytest.mark.parametrize(("n", "required"), {6: 6, 7: 6, 8: 6, 9: 7, 10: 8, 12: 9}.items())
def test_the_table_of_required_standards(n, required):
    assert RULE.survivors(n) == required


@pytest.mark.parametrize(("n", "required"), {6: 6, 7: 6, 8: 6, 9: 7, 10: 8, 12: 9}.items())
@pytest.mark.parametrize("more", [0, 1])
def test_as_many_as_the_table_allows_are_left_out_and_one_more_rejects(n, required, more):
    lost = n - required + more
    x = np.arange(1.0, n + 1)
    y = 2 * x
    # From the top down, and by unlike amounts, so that no good standard is drawn beyond its limit.
    y[n - lost :] *= 1 + 0.5 * np.arange(2, lost + 2)
    line = Line(x, y)
    outcome = exclude_failing(line, LIMITS, RULE)
    decision = judge(line.calls[-1][1], criteria_from(LIMITS)).decision
    if more:
        assert decision == "rejected"
        assert len(outcome.steps) <= n - required
        assert "must remain" in outcome.stopped
    else:
        assert decision == ("accepted with exclusions" if lost else "accepted")
        assert len(outcome.excluded) == lost
        assert outcome.stopped == "all remaining standards pass"


def test_the_most_deviant_goes_first_and_a_rescued_one_stays():
    x = np.arange(1.0, 11.0)
    y = 2 * x
    y[2] *= 6.0  # pulls the line so far that good standards read beyond their limit
    line = Line(x, y)
    outcome = exclude_failing(line, LIMITS, RULE)
    first = [s for s in line.calls[0][1].fitted if not keeps(s, 0.15)]
    assert len(first) > 1
    assert [step.keys for step in outcome.steps] == [(2,)]
    assert [excluded for excluded, _ in line.calls] == [frozenset(), frozenset({2})]


def test_a_lost_end_moves_the_range_inwards_and_the_next_level_keeps_its_own_limit():
    def fit(excluded):
        calls.append(excluded)
        return evidence(
            [standard(x, 0.5 if x == 1 else 0.0, key=x, excluded=x in excluded) for x in range(1, 11)]
        )

    calls = []
    (step,) = exclude_failing(fit, LIMITS, RULE).steps
    assert (step.because.level, step.limit) == (1, 0.20)
    assert (step.lowest, step.highest) == (2, 10)
    assert governing_key(LIMITS, 2, fit(calls[-1]).designed_ends) == "relative_error"


def test_a_standard_without_a_value_is_the_most_deviant():
    found = evidence([standard(x, key=k) for k, x in enumerate(range(1, 9))])
    off = evidence(
        [
            standard(x, 5.0 if k == 3 else float("nan") if k == 6 else 0.0, key=k)
            for k, x in enumerate(range(1, 9))
        ]
    )
    answers = iter([off, found])
    (step,) = exclude_failing(lambda excluded: next(answers), LIMITS, RULE).steps
    assert step.keys == (6,)
    assert step_in_words(step, 1, "mg/L") == (
        "exclusion rule of the method (most deviant first), step 1: S7 at 7 mg/L: no back-calculated value, limit 15 %"
    )


def test_an_exclusion_by_a_person_before_the_fit_counts_in_the_original_number():
    x = np.arange(1.0, 9.0)
    y = 2 * x
    y[[3, 5]] *= (3.0, 5.0)
    # Eight standards, six must remain: one was spilled, so only one more may be lost.
    outcome = exclude_failing(Line(x, y, already_out={7}), LIMITS, RULE)
    assert len(outcome.steps) == 1
    assert outcome.stopped == "6 of the original 8 standards must remain"


def test_nothing_is_left_out_of_a_fit_that_did_not_converge():
    lost = evidence([standard(x, float("nan"), key=x) for x in range(1, 11)], converged=False)
    outcome = exclude_failing(lambda excluded: lost, LIMITS, RULE)
    assert (outcome.steps, outcome.stopped) == ((), "the fit did not converge, so no standard can be judged")


def test_the_method_may_allow_fewer_steps():
    x = np.arange(1.0, 13.0)
    y = 2 * x
    y[[5, 8]] *= (3.0, 8.0)
    outcome = exclude_failing(Line(x, y), LIMITS, ExclusionRule(0.75, 6, most=1))
    assert len(outcome.steps) == 1
    assert outcome.stopped == "the method allows 1 exclusions and no more"


def test_whole_levels_go_together():
    x = np.repeat(np.arange(1.0, 10.0), 2)
    y = 2 * x
    y[6] *= 4.0
    (step,) = exclude_failing(Line(x, y), LIMITS, ExclusionRule(0.75, 6, whole_levels=True)).steps
    assert step.keys == (6, 7)


runs = st.integers(6, 14).flatmap(
    lambda n: st.tuples(
        st.just(n),
        st.lists(st.floats(0.3, 3.0), min_size=n, max_size=n),
        st.lists(st.booleans(), min_size=n, max_size=n),
        st.integers(1, 2),
        st.randoms(use_true_random=False),
    )
)


@settings(max_examples=150, deadline=None)
@given(runs)
def test_the_loop_keeps_its_promises_on_any_run(run):
    n, factors, wrong, replicates, chance = run
    x = np.repeat(np.arange(1.0, n + 1), replicates)
    bend = np.repeat([f if w else 1.0 for f, w in zip(factors, wrong, strict=True)], replicates)
    y = (1 + 2 * x) * (1 + (bend - 1) * np.linspace(1, 0.7, x.size))
    line = Line(x, y)
    outcome = exclude_failing(line, LIMITS, RULE)

    # A passing standard is never left out.
    for (_, before), step in zip(line.calls, outcome.steps, strict=False):
        for key in step.keys:
            (seen,) = [s for s in before.fitted if s.key == key]
            assert not keeps(seen, LIMITS[governing_key(LIMITS, seen.level, before.designed_ends)].value)
    # No run passes with fewer than the required levels and standards.
    last = line.calls[-1][1]
    if judge(last, criteria_from(LIMITS)).decision != "rejected":
        assert len({s.level for s in last.fitted}) >= 6
        assert len(last.fitted) >= np.ceil(0.75 * x.size)
    # The order of the rows changes nothing.
    order = list(range(x.size))
    chance.shuffle(order)
    again = exclude_failing(Line(x[order], y[order]), LIMITS, RULE)
    # Readings that are equal in level and response are interchangeable.
    assert sorted((x[order[k]], y[order[k]]) for k in again.excluded) == sorted(
        (x[k], y[k]) for k in outcome.excluded
    )
    assert [s.because.label for s in again.steps] == [s.because.label for s in outcome.steps]
