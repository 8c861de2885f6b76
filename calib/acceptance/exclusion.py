"""The documented exclusion of failing standards: one at a time, the most deviant first, never a passing one.

Source: ICH M10, 2022, 3.3.2 and the practice under it (second-hand): the most deviant failing standard is
left out, the curve is fitted again and judged again, until all that remain pass or too few would remain.
The counts stay those of the original number of standards.
"""

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass

from calib.acceptance.evidence import Evidence, JudgedStandard
from calib.acceptance.limits import INCLUSIVE, Limit
from calib.acceptance.standard_criteria import governing_key, keeps
from calib.acceptance.wording import amount, percent, signed_percent

RULE = "most deviant first"
"""Name of the rule, as a method asks for it."""

Fit = Callable[[frozenset[int]], Evidence]


@dataclass(frozen=True, slots=True)
class ExclusionRule:
    """How far failing standards may be left out.

    Attributes
    ----------
    share : float
        Share of the original standards that must survive.
    levels : int
        Number of levels that must survive.
    most : int or None
        Steps at most; None for as many as the two above leave.
    whole_levels : bool
        A step leaves out the whole level of the failing standard, not the single reading
        (TNI standard, volume 1 module 4, 1.7.1.1(e), from memory).
    """

    share: float
    levels: int
    most: int | None = None
    whole_levels: bool = False

    def survivors(self, standards: int) -> int:
        """Standards that must remain of so many; one reading a level.

        Examples
        --------
        >>> [ExclusionRule(0.75, 6).survivors(n) for n in (6, 7, 8, 9, 10, 12)]
        [6, 6, 6, 7, 8, 9]
        """
        return max(self.levels, math.ceil(self.share * standards * (1 - INCLUSIVE)))


@dataclass(frozen=True, slots=True)
class ExclusionStep:
    """One exclusion: which readings, because of which one, and the range that remained.

    Attributes
    ----------
    keys : tuple of int
        Keys of the readings left out.
    because : JudgedStandard
        The most deviant failing standard, as the curve before this step read it.
    limit : float
        Its relative-error limit.
    lowest, highest : float or None
        Calibrated range after the step.
    """

    keys: tuple[int, ...]
    because: JudgedStandard
    limit: float
    lowest: float | None
    highest: float | None


@dataclass(frozen=True, slots=True)
class ExclusionOutcome:
    """What the rule came to; ``stopped`` says in words why it went no further."""

    steps: tuple[ExclusionStep, ...]
    stopped: str

    @property
    def excluded(self) -> frozenset[int]:
        """Keys of all readings left out."""
        return frozenset(key for step in self.steps for key in step.keys)


def exclude_failing(fit: Fit, limits: Mapping[str, Limit], rule: ExclusionRule) -> ExclusionOutcome:
    """Leave out failing standards one at a time, the most deviant first.

    Deviance is the relative error over the standard's own limit; a standard without a back-calculated
    value is the most deviant of all.

    Parameters
    ----------
    fit : callable
        Takes the keys to leave out and gives the evidence of the curve fitted without them. It is called
        once for the original fit and once a step.
    limits : mapping of str to Limit
        Of the method, with ``relative_error`` among them.
    rule : ExclusionRule

    Returns
    -------
    ExclusionOutcome
        The curve in force is the one of the last call of ``fit``.
    """
    steps: list[ExclusionStep] = []
    evidence = fit(frozenset())
    while True:
        if not evidence.converged:
            return ExclusionOutcome(tuple(steps), "the fit did not converge, so no standard can be judged")
        worst = _most_deviant(evidence, limits)
        if worst is None:
            return ExclusionOutcome(tuple(steps), "all remaining standards pass")
        if rule.most is not None and len(steps) >= rule.most:
            return ExclusionOutcome(tuple(steps), f"the method allows {rule.most} exclusions and no more")
        out = _left_out(evidence, worst, rule)
        refusal = _too_few(evidence, out, rule)
        if refusal:
            return ExclusionOutcome(tuple(steps), refusal)
        before = frozenset(key for step in steps for key in step.keys)
        evidence = fit(before | frozenset(out))
        lowest, highest = evidence.ends or (None, None)
        steps.append(ExclusionStep(out, worst, _limit_of(worst, limits, evidence), lowest, highest))


def step_in_words(step: ExclusionStep, number: int, unit: str) -> str:
    """Say why a reading was left out, as it stands beside it in the record."""
    error = step.because.relative_error
    seen = "no back-calculated value" if math.isnan(error) else signed_percent(error, step.limit)
    return (
        f"exclusion rule of the method ({RULE}), step {number}: {step.because.label} at "
        f"{amount(step.because.level, unit)}: {seen}, limit {percent(step.limit)}"
    )


def _most_deviant(evidence: Evidence, limits: Mapping[str, Limit]) -> JudgedStandard | None:
    failing = [s for s in evidence.fitted if not keeps(s, _limit_of(s, limits, evidence))]
    # `fitted` has one order whatever the order of the rows, so that equals are settled alike.
    return max(failing, key=lambda s: _deviance(s, _limit_of(s, limits, evidence)), default=None)


def _deviance(standard: JudgedStandard, limit: float) -> float:
    error = abs(standard.relative_error)
    return math.inf if math.isnan(error) or limit == 0 else error / limit


def _limit_of(standard: JudgedStandard, limits: Mapping[str, Limit], evidence: Evidence) -> float:
    return limits[governing_key(limits, standard.level, evidence.designed_ends)].value


def _left_out(evidence: Evidence, worst: JudgedStandard, rule: ExclusionRule) -> tuple[int, ...]:
    if not rule.whole_levels:
        return (worst.key,)
    return tuple(sorted(s.key for s in evidence.fitted if s.level == worst.level))


def _too_few(evidence: Evidence, out: tuple[int, ...], rule: ExclusionRule) -> str:
    """Why no more may be lost; empty where there are enough left."""
    left = [s for s in evidence.fitted if s.key not in out]
    original, levels = len(evidence.judged), len({s.level for s in left})
    needed = math.ceil(rule.share * original * (1 - INCLUSIVE))
    if len(left) < needed:
        return f"{needed} of the original {original} standards must remain"
    if levels < rule.levels:
        return f"{rule.levels} levels must remain"
    return ""
