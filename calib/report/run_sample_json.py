"""The quantities of one sample of a run, with budget, ends of the curve and cross-check, as plain JSON."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

from calib.bench.cross_check import ends_of
from calib.report.as_json import plain, quantity_json
from calib.report.budget_rows import budget_json

if TYPE_CHECKING:
    from calib.bench.cross_check import CrossCheck
    from calib.bench.records import RunRecord

RUN_SAMPLE = "calib-run-sample-1"


def sample_json(record: RunRecord, sample: str, drawn: Sequence[CrossCheck]) -> dict[str, Any]:
    """What `calib run show RUN --sample NAME --json` prints."""
    evaluation = record.evaluation
    found = [q for q in evaluation.quantities if q.sample == sample]
    return {
        "schema": RUN_SAMPLE,
        "run": record.heading.id,
        "sample": sample,
        "quantities": [
            quantity_json(q)
            | {
                "budget_details": budget_json(q, evaluation),
                "asymptote_index": dict(zip(("zero", "infinite"), ends_of(record, q), strict=True)),
            }
            for q in found
        ],
        "left_out": list(evaluation.basis.left_out),
        "past_runs": list(evaluation.basis.runs),
        "monte_carlo": [plain(d) for d in drawn],
    }
