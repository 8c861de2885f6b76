"""Criteria on the curve as a whole, the blanks, the check standards and the detector."""

import math
from typing import ClassVar

from calib.acceptance.criterion import CriterionResult, LimitedCriterion
from calib.acceptance.evidence import Evidence, JudgedCheck
from calib.acceptance.limits import Quantity, at_most, within
from calib.acceptance.wording import amount, count, figure, listed, percent, signed_percent, span, with_unit

UNUSABLE_FINDINGS = (
    "not-converged",
    "not-identifiable",
    "too-few-levels",
    "at-bound",
    "no-residual-freedom",
    "no-scatter",
    "run-not-acceptable",
    "flat",
)
"""Findings of a curve that no limit of a method can outweigh."""


CLEAN_UP = "find where the analyte in the blank comes from, clean, and calibrate again"


class CurveUsable:
    """The one criterion no method can switch off: the fit converged and its parameters mean something."""

    def judge(self, evidence: Evidence) -> CriterionResult:
        """Fail on a fit that did not converge, and on every finding of `UNUSABLE_FINDINGS`."""
        problems = [message for code, message in evidence.findings if code in UNUSABLE_FINDINGS]
        if not evidence.converged and "not-converged" not in {code for code, _ in evidence.findings}:
            problems.insert(0, "the fit did not converge")
        return CriterionResult(
            id="curve-usable",
            what="the fit converged, and nothing forbids the use of its curve",
            limit=None,
            observed=None,
            passed=not problems,
            source="always judged",
            detail="; ".join(problems) or "converged",
            remedy="no limit outweighs this: look at the standards it names and measure again"
            if problems
            else "",
        )


class ResidualSd(LimitedCriterion):
    """Residual standard deviation of the curve, in units of the noise model's scale."""

    key: ClassVar[str] = "residual_sd"
    quantity: ClassVar[Quantity] = Quantity.SCALE

    def judge(self, evidence: Evidence) -> CriterionResult:
        """Compare the residual standard deviation with the limit; without a value it fails."""
        observed = evidence.residual_sd
        what = f"residual standard deviation at most {self.limit.value:g} (scale of the noise model)"
        detail = "no value" if math.isnan(observed) else figure(observed, self.limit.value)
        return self._result(
            what,
            observed,
            within(observed, self.limit.value),
            detail,
            "the readings scatter more about the curve than the method allows: look for the level or "
            "replicate that stands off, and measure again",
        )


class Blank(LimitedCriterion):
    """Back-calculated concentration of the largest blank."""

    key: ClassVar[str] = "blank"
    quantity: ClassVar[Quantity] = Quantity.CONCENTRATION

    def judge(self, evidence: Evidence) -> CriterionResult:
        """Compare the largest blank with the limit; a blank off the curve fails."""
        unit, blanks = evidence.concentration_unit, evidence.blanks
        what = f"largest blank at most {amount(self.limit.value, unit)}"
        if not blanks:
            return self._result(what, None, True, "no blank in this run")
        missing = sum(math.isnan(blank) for blank in blanks)
        if missing:
            detail = f"{missing} of {count(len(blanks), 'blank')} without a back-calculated value"
            return self._result(what, None, False, detail, CLEAN_UP)
        largest = max(blanks)
        detail = (
            f"largest of {count(len(blanks), 'blank')}: {with_unit(figure(largest, self.limit.value), unit)}"
        )
        return self._result(what, largest, at_most(largest, self.limit.value), detail, CLEAN_UP)


class BlankShare(LimitedCriterion):
    """Largest blank as a share of the reporting limit of the method."""

    key: ClassVar[str] = "blank_share"
    quantity: ClassVar[Quantity] = Quantity.FRACTION

    def judge(self, evidence: Evidence) -> CriterionResult:
        """Compare the largest blank with the share; a method without a reporting limit has nothing to judge."""
        what = f"largest blank at most {percent(self.limit.value)} of the reporting limit"
        if evidence.reporting_limit is None:
            return self._result(what, None, True, "the method sets no reporting limit")
        if not evidence.blanks:
            return self._result(what, None, True, "no blank in this run")
        if any(math.isnan(blank) for blank in evidence.blanks):
            return self._result(what, None, False, "a blank has no back-calculated value", CLEAN_UP)
        share = max(evidence.blanks) / evidence.reporting_limit
        detail = f"{100 * share:.4g} % of {amount(evidence.reporting_limit, evidence.concentration_unit)}"
        return self._result(what, share, at_most(share, self.limit.value), detail, CLEAN_UP)


class CarryOver(LimitedCriterion):
    """Largest response of a carry-over blank, as a share of that of the lowest standard.

    Source of the rule: ICH M10, 2022, 3.2.6: at most 20 % of the response at the lowest level (second-hand).
    """

    key: ClassVar[str] = "carry_over"
    quantity: ClassVar[Quantity] = Quantity.FRACTION

    def judge(self, evidence: Evidence) -> CriterionResult:
        """Compare the largest share with the limit; a run without carry-over blank has nothing to judge."""
        what = f"carry-over blank at most {percent(self.limit.value)} of the response of the lowest standard"
        shares = evidence.carry_over
        if not shares:
            return self._result(what, None, True, "no carry-over blank in this run")
        largest = math.nan if any(math.isnan(s) for s in shares) else max(shares)
        detail = "no value" if math.isnan(largest) else f"{100 * largest:.1f} %"
        return self._result(
            what,
            largest,
            at_most(largest, self.limit.value),
            detail,
            "clean the path of the sample; a sample measured after a high one may hold some of it: re-run it",
        )


class CheckRecovery(LimitedCriterion):
    """Largest deviation abs(found / level - 1) of the check standards."""

    key: ClassVar[str] = "check_recovery"
    quantity: ClassVar[Quantity] = Quantity.FRACTION
    role: ClassVar[str] = "check"
    noun: ClassVar[str] = "check standard"

    def judge(self, evidence: Evidence) -> CriterionResult:
        """Every check must keep the limit; one off the curve fails; a run without any passes, and says so."""
        what = f"deviation of each {self.noun} at most {percent(self.limit.value)}"
        checks = sorted(self._chosen(evidence), key=_order)
        if not checks:
            return self._result(what, None, True, f"no {self.noun} in this run")
        failing = [c for c in checks if not within(c.deviation, self.limit.value)]
        return self._result(
            what,
            _largest(checks),
            not failing,
            self._detail(checks, failing, evidence),
            self._remedy(failing, evidence),
        )

    def _chosen(self, evidence: Evidence) -> list[JudgedCheck]:
        return [c for c in evidence.checks if c.role == self.role]

    def _remedy(self, failing: list[JudgedCheck], evidence: Evidence) -> str:
        spans = [
            f"{c.label} would have to read {span(c.level, self.limit.value, evidence.concentration_unit)}"
            for c in failing
        ]
        return listed(spans)

    def _detail(self, checks: list[JudgedCheck], failing: list[JudgedCheck], evidence: Evidence) -> str:
        shown = failing or [max(checks, key=lambda c: abs(c.deviation))]
        words = [
            f"{c.label} at {amount(c.level, evidence.concentration_unit)}: {self._say(c)}" for c in shown
        ]
        return ("beyond the limit: " if failing else "largest: ") + listed(words)

    def _say(self, check: JudgedCheck) -> str:
        if math.isnan(check.deviation):
            return "no recovery (off the curve, or level 0)"
        return signed_percent(check.deviation, self.limit.value)


class OpeningCheckRecovery(CheckRecovery):
    """Deviation of the check standard measured first after the curve, where it has a limit of its own."""

    key: ClassVar[str] = "opening_check_recovery"
    noun: ClassVar[str] = "check standard right after the curve"

    def _chosen(self, evidence: Evidence) -> list[JudgedCheck]:
        return [c for c in evidence.checks if c.role == self.role][:1]


class FirstCheckRecovery(CheckRecovery):
    """Largest deviation of the first checks, made from a second source."""

    key: ClassVar[str] = "first_check_recovery"
    role: ClassVar[str] = "first-check"
    noun: ClassVar[str] = "first check"


class SaturatedStandards(LimitedCriterion):
    """Number of saturated readings in the fit, anchor standards included."""

    key: ClassVar[str] = "saturated_standards"
    quantity: ClassVar[Quantity] = Quantity.COUNT

    def judge(self, evidence: Evidence) -> CriterionResult:
        """Compare the number of saturated readings in the fit with the limit."""
        unit = evidence.concentration_unit
        saturated = sorted((s.level, s.label) for s in evidence.standards if s.saturated and not s.excluded)
        named = ", ".join(f"{label} at {amount(level, unit)}" for level, label in saturated)
        what = f"at most {count(int(self.limit.value), 'saturated standard')} in the fit"
        passed = at_most(len(saturated), self.limit.value)
        return self._result(
            what,
            len(saturated),
            passed,
            f"saturated: {named}" if named else "none",
            "exclude the saturated readings with their cause, or dilute the highest standards",
        )


def _order(check: JudgedCheck) -> tuple[float, str, bool, float]:
    """By level, so that the words of a verdict do not depend on the order of the rows."""
    return check.level, check.label, math.isnan(check.found), check.found


def _largest(checks: list[JudgedCheck]) -> float:
    """Return the largest deviation in size, nan as soon as one has no value."""
    sizes = [abs(check.deviation) for check in checks]
    return math.nan if any(math.isnan(size) for size in sizes) else max(sizes)
