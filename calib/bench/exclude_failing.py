"""Apply the exclusion rule of a method to a run, and keep every curve on the way."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import replace

from calib.acceptance import Evidence, exclude_failing
from calib.acceptance.exclusion import ExclusionStep, step_in_words
from calib.bench.method_definition import MethodDefinition
from calib.bench.records import Evaluation, Measured
from calib.curves.curve import Curve

Fit = Callable[[Sequence[Measured]], Curve]
Judge = Callable[[Sequence[Measured], Curve], tuple[Evaluation, Evidence]]


def evaluate_with_exclusions(
    definition: MethodDefinition, readings: Sequence[Measured], first: Curve, fit: Fit, judge: Judge
) -> Evaluation:
    """Judge a run whose failing standards are left out one at a time.

    Parameters
    ----------
    definition : MethodDefinition
        With an exclusion rule.
    readings : sequence of Measured
        Exclusions decided by people are in force already.
    first : Curve
        Curve of all that is to be fitted.
    fit : callable
        Fits the readings that are not excluded.
    judge : callable
        Evaluates readings on a curve.

    Returns
    -------
    Evaluation
        Of the last curve; ``before`` holds the earlier ones, oldest first.
    """
    rule = definition.exclusion
    if rule is None:
        return judge(readings, first)[0]
    stages: list[Evaluation] = []

    def refit(excluded: frozenset[int]) -> Evidence:
        kept = _without(readings, dict.fromkeys(excluded, "left out by the exclusion rule"))
        evaluation, evidence = judge(kept, fit(kept) if excluded else first)
        stages.append(evaluation)
        return evidence

    outcome = exclude_failing(refit, definition.limits, rule)
    if not outcome.steps:
        return stages[0]
    told = [_with_reasons(stage, outcome.steps[:n], definition) for n, stage in enumerate(stages)]
    return replace(told[-1], before=tuple(replace(stage, quantities=()) for stage in told[:-1]))


def _without(readings: Sequence[Measured], reasons: dict[int, str]) -> list[Measured]:
    return [replace(r, excluded=reasons[r.key]) if r.key in reasons else r for r in readings]


def _with_reasons(
    stage: Evaluation, steps: Sequence[ExclusionStep], definition: MethodDefinition
) -> Evaluation:
    """The stage with the words of the rule beside each reading it left out."""
    reasons = {
        key: step_in_words(step, number, definition.concentration_unit)
        for number, step in enumerate(steps, start=1)
        for key in step.keys
    }
    standards = tuple(replace(s, reason=reasons[s.key]) if s.key in reasons else s for s in stage.standards)
    return replace(stage, standards=standards)
