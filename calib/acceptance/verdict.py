"""The verdict on a curve: accepted, accepted with exclusions, or rejected, with the reasons."""

import math
from collections.abc import Sequence
from dataclasses import dataclass

from calib.acceptance.criterion import Criterion, CriterionResult
from calib.acceptance.evidence import Evidence
from calib.acceptance.run_criteria import CurveUsable

ACCEPTED = "accepted"
ACCEPTED_WITH_EXCLUSIONS = "accepted with exclusions"
REJECTED = "rejected"


@dataclass(frozen=True, slots=True)
class Verdict:
    """The decision on one curve and what it rests on.

    Attributes
    ----------
    decision : str
        'accepted', 'accepted with exclusions' or 'rejected'.
    criteria : tuple of CriterionResult
        All that were judged, 'curve-usable' first.
    lowest, highest : float or None
        Calibrated range: lowest and highest standard in the fit, above zero, anchors apart.
    r_squared : float or None
        Shown, never judged.
    reasons : tuple of str
        The criteria that reject the curve, in words and figures.
    """

    decision: str
    criteria: tuple[CriterionResult, ...]
    lowest: float | None
    highest: float | None
    r_squared: float | None
    reasons: tuple[str, ...]


def judge(evidence: Evidence, criteria: Sequence[Criterion]) -> Verdict:
    """Judge a curve by the criteria of its method, and always by 'curve-usable'.

    Parameters
    ----------
    evidence : Evidence
        The standards, checks and blanks as the curve reads them.
    criteria : sequence of Criterion
        From `criteria_from`.

    Returns
    -------
    Verdict
        Rejected when any criterion fails that does more than warn.
    """
    results = tuple(criterion.judge(evidence) for criterion in (CurveUsable(), *criteria))
    lowest, highest = evidence.ends or (None, None)
    return Verdict(
        decision=_decision(evidence, results),
        criteria=results,
        lowest=lowest,
        highest=highest,
        r_squared=evidence.r_squared if math.isfinite(evidence.r_squared) else None,
        reasons=tuple(f"{r.what}: {r.detail}" for r in results if r.rejects),
    )


def _decision(evidence: Evidence, results: Sequence[CriterionResult]) -> str:
    if any(result.rejects for result in results):
        return REJECTED
    excluded = any(standard.excluded for standard in evidence.judged)
    return ACCEPTED_WITH_EXCLUSIONS if excluded else ACCEPTED
