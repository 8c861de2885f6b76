"""The assessment of a method as plain JSON values."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Any

from calib.report.assessment_rows import recommendation

if TYPE_CHECKING:
    from calib.bench.assess import Assessment, JudgedComparison
    from calib.curves.nested_models import FTest

ASSESSMENT = "calib-assessment-1"


def assessment_json(a: Assessment) -> dict[str, Any]:
    """What `calib method assess --json` prints."""
    return {
        "schema": ASSESSMENT,
        "method": a.method,
        "method_version": a.version,
        "instrument": a.instrument,
        "model": a.model,
        "runs": a.runs,
        "noise": a.noise.to_dict(),
        "comparisons": [_comparison(j) for j in a.comparisons],
        "range": {
            "unit": a.concentration_unit,
            "runs": a.last,
            "replicates": a.replicates,
            "required_cv": a.cv,
            "lowest_standard": a.calibrated[0],
            "highest_standard": a.calibrated[1],
            "working_lowest": a.working[0],
            "working_highest": a.working[1],
            "critical": a.critical,
            "detectable": a.detectable,
            "reporting_limit": a.reporting_limit,
        },
        "precision_profile": [
            {"concentration": float(x), "cv": _finite(float(v))}
            for x, v in zip(a.concentration, a.profile, strict=True)
        ],
        "recommendation": recommendation(a),
    }


def _comparison(j: JudgedComparison) -> dict[str, Any]:
    c = j.comparison
    return {
        "smaller": c.smaller,
        "larger": c.larger,
        "runs": c.runs,
        "readings": c.readings,
        "nested": _test(c.nested),
        "lack_of_fit": None if c.lack_of_fit is None else _test(c.lack_of_fit),
        "aicc_difference": c.aicc_difference,
        "worst_bias": _finite(j.worst_bias),
        "smaller_reads_no_value": math.isinf(j.worst_bias),
        "allowed_bias": j.allowed,
        "larger_needed": j.larger_needed,
    }


def _test(test: FTest) -> dict[str, Any]:
    return {"f": test.ratio, "numerator": test.numerator, "denominator": test.denominator, "p": test.p}


def _finite(value: float) -> float | None:
    return value if math.isfinite(value) else None
