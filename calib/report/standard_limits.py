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
    verdict, limits = record.evaluation.verdict, record.definition.limits
    ends = None
    if verdict.lowest is not None and verdict.highest is not None:
        ends = (verdict.lowest, verdict.highest)
    limit = limits.get(governing_key(limits, level, ends))
    return limit.value if limit and level > 0 else None
