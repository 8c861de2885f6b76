"""Criteria on what a run must hold besides its standards: blanks, zero standards, checks, controls."""

import math
from typing import ClassVar

from calib.acceptance.criterion import CriterionResult, LimitedCriterion
from calib.acceptance.evidence import Evidence
from calib.acceptance.limits import Quantity, at_least
from calib.acceptance.wording import count, percent


class MinimumBlanks(LimitedCriterion):
    """Number of blanks with a response."""

    key: ClassVar[str] = "minimum_blanks"
    quantity: ClassVar[Quantity] = Quantity.COUNT
    role: ClassVar[str] = "blank"
    noun: ClassVar[str] = "blank"

    def judge(self, evidence: Evidence) -> CriterionResult:
        """Compare the number of readings of the role with the limit."""
        needed, there = int(self.limit.value), evidence.counts.get(self.role, 0)
        return self._result(
            f"at least {count(needed, self.noun)} in the run",
            there,
            there >= needed,
            count(there, self.noun),
            f"measure {count(needed - there, self.noun)} more with the run",
        )


class MinimumZeros(MinimumBlanks):
    """Number of zero standards with a response."""

    key: ClassVar[str] = "minimum_zeros"
    role: ClassVar[str] = "zero"
    noun: ClassVar[str] = "zero standard"


class MinimumChecks(MinimumBlanks):
    """Number of check standards with a response."""

    key: ClassVar[str] = "minimum_checks"
    role: ClassVar[str] = "check"
    noun: ClassVar[str] = "check standard"


class MinimumFirstChecks(MinimumBlanks):
    """Number of first checks (second source) with a response."""

    key: ClassVar[str] = "minimum_first_checks"
    role: ClassVar[str] = "first-check"
    noun: ClassVar[str] = "first check"


class MinimumControls(MinimumBlanks):
    """Number of control samples with a response."""

    key: ClassVar[str] = "minimum_controls"
    role: ClassVar[str] = "control"
    noun: ClassVar[str] = "control"


class MinimumControlShare(LimitedCriterion):
    """Number of control samples as a share of the samples measured with them."""

    key: ClassVar[str] = "minimum_control_share"
    quantity: ClassVar[Quantity] = Quantity.SHARE

    def judge(self, evidence: Evidence) -> CriterionResult:
        """Compare the share with the limit; a run without samples has nothing to judge."""
        what = f"controls at least {percent(self.limit.value)} of the samples"
        samples, controls = evidence.counts.get("unknown", 0), evidence.counts.get("control", 0)
        if not samples:
            return self._result(what, None, True, "no samples in this run")
        detail = f"{count(controls, 'control')} for {count(samples, 'sample')}"
        needed = math.ceil(self.limit.value * samples - 1e-9)
        share = controls / samples
        return self._result(
            what,
            share,
            at_least(share, self.limit.value),
            detail,
            f"measure {count(needed, 'control')} with so many samples",
        )
