"""What many runs say together, as plain JSON values: a drift review, a replay."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from calib.report.as_json import plain

if TYPE_CHECKING:
    from calib.bench.replay_records import Outcome, Replay, ReplayedRun
    from calib.bench.review_drift import DriftRecord

DRIFT = "calib-drift-1"
REPLAY = "calib-replay-1"


def drift_json(record: DriftRecord) -> dict[str, Any]:
    """A drift review."""
    series = [
        {
            "family": s.family,
            "name": s.name,
            "values": plain(s.values),
            "limits": plain(s.limits),
            "first_signals": [record.runs[i].id for i in s.first_signals],
        }
        for s in record.review.series
    ]
    return {
        "schema": DRIFT,
        "instrument": record.instrument,
        "method": record.method,
        "unit": record.concentration_unit,
        "references": list(record.references),
        "runs": [
            plain(run)
            | {
                "shift_percent": plain(record.shift_percent[i]),
                "recovery_percent": plain(record.recovery_percent[i]),
            }
            for i, run in enumerate(record.runs)
        ],
        "events": [plain(e) for e in record.events],
        "series": series,
        "baseline_runs": record.baseline_runs,
        "provisional": record.review.provisional,
    }


def replay_json(record: Replay) -> dict[str, Any]:
    """What `calib replay --json` prints: the runs that would change, each before and after."""
    return {
        "schema": REPLAY,
        "methods": [plain(m) for m in record.methods],
        "runs": record.runs,
        "void_runs_left_out": record.void,
        "samples": record.samples,
        "verdict_changes": [
            {"before": before, "after": after, "runs": n}
            for (before, after), n in record.verdict_changes.items()
        ],
        "sample_changes": record.sample_changes,
        "changed": [_replayed(run) for run in record.changed],
    }


def _replayed(run: ReplayedRun) -> dict[str, Any]:
    return {
        "run": run.id,
        "kind": run.kind,
        "instrument": run.instrument,
        "method": run.method,
        "method_version": run.version,
        "at": run.at.isoformat(),
        "changes": list(run.changes),
        "first_reason": run.first_reason,
        "before": _outcome(run.before, run.unit),
        "after": _outcome(run.after, run.unit),
        "sample_count": run.sample_count,
        "largest_change": run.largest_change,
        "samples": [
            plain(s) | {"change": s.change, "relative_change": s.relative_change, "unit": run.unit}
            for s in run.samples
        ],
    }


def _outcome(outcome: Outcome, unit: str) -> dict[str, Any]:
    return {
        "decision": outcome.decision,
        "reasons": list(outcome.reasons),
        "calibrated_range": plain(outcome.calibrated) | {"unit": unit},
        "working_range": plain(outcome.working) | {"unit": unit},
    }
