"""Which relative-error limit governs a standard of a run."""

from __future__ import annotations

from typing import TYPE_CHECKING

from calib.acceptance.standard_criteria import governing_key

if TYPE_CHECKING:
    from calib.bench.records import RunRecord


def relative_error_limit(record: RunRecord, level: float) -> float | None:
    """Limit a standard at ``level`` was judged by, a fraction; None where the method sets none.

    Parameters
    ----------
    record : RunRecord
    level : float
        Nominal concentration of a standard that is no anchor.
    """
    limits = record.definition.limits
    levels = [
        s.concentration
        for s in record.evaluation.standards
        if s.role == "standard" and s.concentration > 0 and (s.response is not None or s.saturated)
    ]
    ends = (min(levels), max(levels)) if levels else None
    limit = limits.get(governing_key(limits, level, ends))
    return limit.value if limit and level > 0 else None
