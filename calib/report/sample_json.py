"""Samples and what each waits for, as plain JSON values."""

from __future__ import annotations

from collections.abc import Iterable
from typing import TYPE_CHECKING, Any

from calib.report.as_json import plain, quantity_json

if TYPE_CHECKING:
    from calib.bench.sample_desk import SampleRecord, SampleResult

SAMPLES = "calib-samples-1"


def samples_json(records: Iterable[SampleRecord]) -> dict[str, Any]:
    """What `calib sample list --json` and `calib sample show --json` print."""
    return {"schema": SAMPLES, "samples": [_sample(record) for record in records]}


def _sample(record: SampleRecord) -> dict[str, Any]:
    return {
        "sample": record.sample,
        "method": record.method,
        "unit": record.unit,
        "state": record.state,
        "why": record.why,
        "draft": record.state != "release",
        "dilutions": plain(record.dilutions),
        "counting_runs": [result.run for result in record.counts],
        "results": [_result(result, result in record.counts) for result in record.results],
    }


def _result(result: SampleResult, counts: bool) -> dict[str, Any]:
    return {
        "run": result.run,
        "kind": result.kind,
        "instrument": result.instrument,
        "at": result.at.isoformat(),
        "counts": counts,
        "approved": result.approved,
        "review": result.review.state,
        "draft": not result.approved,
        "void": result.void,
        "statement": plain(result.statement),
        "quantity": quantity_json(result.quantity),
    }
