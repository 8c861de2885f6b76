"""Judge the curve of a run by the acceptance criteria of its method."""

from calib.acceptance.criteria import CRITERIA, criteria_from
from calib.acceptance.criterion import Criterion, CriterionResult
from calib.acceptance.evidence import Evidence, JudgedCheck, JudgedStandard
from calib.acceptance.exclusion import ExclusionRule, exclude_failing
from calib.acceptance.limits import Limit, Quantity, ratio_of, read_preset
from calib.acceptance.verdict import Verdict, judge

__all__ = [
    "CRITERIA",
    "Criterion",
    "CriterionResult",
    "Evidence",
    "ExclusionRule",
    "JudgedCheck",
    "JudgedStandard",
    "Limit",
    "Quantity",
    "Verdict",
    "criteria_from",
    "exclude_failing",
    "judge",
    "ratio_of",
    "read_preset",
]
