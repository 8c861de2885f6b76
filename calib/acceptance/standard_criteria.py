"""Criteria on the standards of the curve: relative errors, and how many keep their limit."""

import math
from collections.abc import Iterable, Mapping
from dataclasses import replace
from typing import ClassVar

from calib.acceptance.criterion import CriterionResult, LimitedCriterion
from calib.acceptance.evidence import Evidence, JudgedStandard
from calib.acceptance.limits import INCLUSIVE, Limit, Quantity, at_least, within
from calib.acceptance.wording import (
    amount,
    count,
    listed,
    percent,
    relative_error_words,
    signed_percent,
    span,
    worst_first,
)

MIDDLE = "relative_error"
LOWEST = "relative_error_lowest"
HIGHEST = "relative_error_highest"
RELATIVE_ERRORS = (MIDDLE, LOWEST, HIGHEST)


def governing_key(limits: Mapping[str, Limit], level: float, ends: tuple[float, float] | None) -> str:
    """Which relative-error limit a level is judged by: an end level's own one where the method gives it.

    ``ends`` are those of the run as it was designed, so that a level keeps its limit whatever is excluded.
    """
    if ends is not None and level == ends[0] and LOWEST in limits:
        return LOWEST
    if ends is not None and level == ends[1] and HIGHEST in limits:
        return HIGHEST
    return MIDDLE


def keeps(standard: JudgedStandard, limit: float) -> bool:
    """Whether a standard is in the fit, has a back-calculated value, and keeps the limit."""
    back_calculated = not math.isnan(standard.back_calculated)
    return not standard.excluded and back_calculated and within(standard.relative_error, limit)


class ErrorOfStandards(LimitedCriterion):
    """Largest relative error of the standards in the fit that this limit governs."""

    key: ClassVar[str] = MIDDLE
    quantity: ClassVar[Quantity] = Quantity.FRACTION

    def judge(self, evidence: Evidence) -> CriterionResult:
        """Every governed standard must keep the limit; one without a back-calculated value fails."""
        what = f"relative error of {self._whom()} at most {percent(self.limit.value)}"
        if not evidence.fitted:
            return self._result(what, None, False, "no standard above zero is in the fit")
        governed = self._governed(evidence)
        if not governed:
            return self._result(what, None, True, "no standard in the fit falls under this limit")
        failing = [s for s in governed if not keeps(s, self.limit.value)]
        return self._result(
            what,
            _largest(governed),
            not failing,
            self._detail(governed, failing, evidence),
            self._remedy(failing, evidence),
        )

    def _remedy(self, failing: list[JudgedStandard], evidence: Evidence) -> str:
        return listed([_would_pass(s, self.limit.value, evidence) for s in worst_first(failing)])

    def _whom(self) -> str:
        words = {
            (False, False): "each standard",
            (True, False): "each standard above the lowest level",
            (False, True): "each standard below the highest level",
            (True, True): "each standard between the end levels",
        }
        return words[LOWEST in self.limits, HIGHEST in self.limits]

    def _governed(self, evidence: Evidence) -> list[JudgedStandard]:
        ends = evidence.designed_ends
        return [s for s in evidence.fitted if governing_key(self.limits, s.level, ends) == self.key]

    def _detail(
        self, governed: list[JudgedStandard], failing: list[JudgedStandard], evidence: Evidence
    ) -> str:
        shown = worst_first(failing) or [max(governed, key=lambda s: abs(s.relative_error))]
        words = [relative_error_words(s, evidence.concentration_unit, self.limit.value) for s in shown]
        return ("beyond the limit: " if failing else "largest: ") + listed(words)


class ErrorAtLowest(ErrorOfStandards):
    """Largest relative error at the lowest level in the fit."""

    key: ClassVar[str] = LOWEST

    def _whom(self) -> str:
        return "the lowest level"


class ErrorAtHighest(ErrorOfStandards):
    """Largest relative error at the highest level in the fit."""

    key: ClassVar[str] = HIGHEST

    def _whom(self) -> str:
        return "the highest level"


class StandardsPassing(LimitedCriterion):
    """Share of the original standards that keep their relative-error limit.

    An excluded reading counts in the original number and cannot pass.
    """

    key: ClassVar[str] = "standards_passing"
    quantity: ClassVar[Quantity] = Quantity.SHARE

    def judge(self, evidence: Evidence) -> CriterionResult:
        """Compare the passing share with the limit."""
        result = self._judge(evidence)
        return replace(result, source=self._sources())

    def _judge(self, evidence: Evidence) -> CriterionResult:
        what = (
            f"at least {percent(self.limit.value)} of the standards within their relative error "
            f"({self._limits_in_words()})"
        )
        if not evidence.judged:
            return self._result(what, None, False, "no standard above zero in this run")
        failing = [s for s in evidence.judged if not _keeps_own_limit(s, self.limits, evidence)]
        passing = len(evidence.judged) - len(failing)
        share = passing / len(evidence.judged)
        detail = f"{passing} of {count(len(evidence.judged), 'standard')} ({100 * share:.1f} %)"
        needed = math.ceil(self.limit.value * len(evidence.judged) * (1 - INCLUSIVE))
        return self._result(
            what,
            share,
            at_least(share, self.limit.value),
            detail + self._named(failing, evidence),
            f"{needed} of {len(evidence.judged)} would have to pass: "
            + listed(
                [_would_pass(s, _own_limit(s, self.limits, evidence), evidence) for s in worst_first(failing)]
            ),
        )

    def _named(self, failing: list[JudgedStandard], evidence: Evidence) -> str:
        words = [
            relative_error_words(s, evidence.concentration_unit, _own_limit(s, self.limits, evidence))
            for s in worst_first(failing)
        ]
        return "; not within: " + listed(words) if words else ""

    def _limits_in_words(self) -> str:
        """The relative-error limits this share counts against."""
        whom = {MIDDLE: "", LOWEST: "lowest level ", HIGHEST: "highest level "}
        return ", ".join(f"{w}{percent(self.limits[k].value)}" for k, w in whom.items() if k in self.limits)

    def _sources(self) -> str:
        """Where the share and the limits it counts against come from, each once."""
        keys = (self.key, *RELATIVE_ERRORS)
        return "; ".join(dict.fromkeys(self.limits[k].cited for k in keys if k in self.limits))


class LevelsPassing(LimitedCriterion):
    """Number of levels at which at least half of the original readings keep their limit."""

    key: ClassVar[str] = "levels_passing"
    quantity: ClassVar[Quantity] = Quantity.COUNT

    def judge(self, evidence: Evidence) -> CriterionResult:
        """Compare the number of passing levels with the limit."""
        what = (
            f"at least {count(int(self.limit.value), 'level')} with half or more of the readings"
            " within their limit"
        )
        failing = [level for level in _levels(evidence.judged) if not self._passes(level, evidence)]
        passing = len(_levels(evidence.judged)) - len(failing)
        named = [amount(level, evidence.concentration_unit) for level in failing]
        detail = count(passing, "passing level") + (f"; not passing: {', '.join(named)}" if named else "")
        return self._result(
            what,
            passing,
            at_least(passing, self.limit.value),
            detail,
            f"{count(int(self.limit.value) - passing, 'more level')} would have to pass, by more levels in the "
            "run or by better readings at those named",
        )

    def _passes(self, level: float, evidence: Evidence) -> bool:
        readings = [s for s in evidence.judged if s.level == level]
        passing = [s for s in readings if _keeps_own_limit(s, self.limits, evidence)]
        return 2 * len(passing) >= len(readings)


class MinimumLevels(LimitedCriterion):
    """Number of distinct levels above zero in the fit; anchor standards do not count."""

    key: ClassVar[str] = "minimum_levels"
    quantity: ClassVar[Quantity] = Quantity.COUNT

    def judge(self, evidence: Evidence) -> CriterionResult:
        """Compare the number of levels with the limit."""
        levels = len(_levels(evidence.fitted))
        what = f"at least {count(int(self.limit.value), 'level')} above zero in the fit"
        missing = int(self.limit.value) - levels
        return self._result(
            what,
            levels,
            at_least(levels, self.limit.value),
            count(levels, "level"),
            f"measure {count(missing, 'more level')} of standards",
        )


class StandardErrorOfCurve(LimitedCriterion):
    """Relative standard error of the curve, sqrt(sum(RE**2) / (n - p)).

    Source: The NELAC Institute, Calculating Relative Standard Error (RSE), 2017; p is the number
    of estimated parameters, whatever the noise model.
    """

    key: ClassVar[str] = "relative_standard_error"
    quantity: ClassVar[Quantity] = Quantity.FRACTION

    def judge(self, evidence: Evidence) -> CriterionResult:
        """Compare the relative standard error with the limit; without a value it fails."""
        what = f"relative standard error at most {percent(self.limit.value)}"
        n, p = len(evidence.fitted), evidence.free_parameters
        basis = f"from {count(n, 'standard')} and {count(p, 'parameter')}"
        if n <= p:
            return self._result(what, None, False, f"no value {basis}: more standards are needed")
        rse = relative_standard_error((s.relative_error for s in evidence.fitted), n - p)
        if math.isnan(rse):
            return self._result(
                what, None, False, f"no value {basis}: a standard has no back-calculated value"
            )
        shown = signed_percent(rse, self.limit.value).removeprefix("+")
        worst = max(evidence.fitted, key=lambda s: abs(s.relative_error))
        words = relative_error_words(worst, evidence.concentration_unit, math.inf)
        return self._result(
            what,
            rse,
            within(rse, self.limit.value),
            f"{shown} {basis}",
            f"the relative errors would have to be smaller; the largest part of it is {words}",
        )


def relative_standard_error(relative_errors: Iterable[float], degrees_of_freedom: int) -> float:
    """Compute sqrt(sum(RE**2) / degrees_of_freedom), exactly summed so that the order does not matter."""
    return math.sqrt(math.fsum(error * error for error in relative_errors) / degrees_of_freedom)


def _would_pass(standard: JudgedStandard, limit: float, evidence: Evidence) -> str:
    unit = evidence.concentration_unit
    if standard.excluded:
        return f"{standard.label} is excluded and cannot pass"
    return f"{standard.label} would have to read {span(standard.level, limit, unit)}"


def _own_limit(standard: JudgedStandard, limits: Mapping[str, Limit], evidence: Evidence) -> float:
    return limits[governing_key(limits, standard.level, evidence.designed_ends)].value


def _keeps_own_limit(standard: JudgedStandard, limits: Mapping[str, Limit], evidence: Evidence) -> bool:
    return keeps(standard, _own_limit(standard, limits, evidence))


def _levels(standards: Iterable[JudgedStandard]) -> list[float]:
    return sorted({s.level for s in standards})


def _largest(standards: Iterable[JudgedStandard]) -> float:
    """Return the largest relative error in size, nan as soon as one has no value."""
    sizes = [abs(s.relative_error) for s in standards]
    return math.nan if any(math.isnan(size) for size in sizes) else max(sizes)
