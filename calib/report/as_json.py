"""Records as plain JSON values: documented keys, full precision, null where undefined."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from dataclasses import fields, is_dataclass
from datetime import date, datetime
from typing import TYPE_CHECKING, Any

import numpy as np

from calib.bench.statements import statement_of
from calib.report.budget_rows import budget_json
from calib.report.review_wording import status_line

if TYPE_CHECKING:
    from calib.bench.control_history import ControlHistory
    from calib.bench.log_run import EvaluatedPlan
    from calib.bench.records import (
        Evaluation,
        NoiseHistory,
        OutlyingProposal,
        QuantityRecord,
        ReportStamp,
        RunHeading,
        RunRecord,
        StandardRecord,
    )
    from calib.bench.register import MethodRecord

LOG = "calib-log-1"
RUNS = "calib-runs-1"
PREVIEW = "calib-preview-1"
RULES = "calib-rules-1"


def log_json(file: str, records: Iterable[RunRecord]) -> dict[str, Any]:
    """What `calib log --json` and `calib quantify --json` print."""
    return {"schema": LOG, "file": file, "runs": [run_json(r) for r in records]}


def run_json(record: RunRecord, stamp: ReportStamp | None = None) -> dict[str, Any]:
    """One run, as `calib run show --json` prints it; with a stamp, as a report of it was issued."""
    evaluation = record.evaluation
    return {
        "status": status_line(record.review, stamp),
        "draft": stamp is None and not record.review.approved,
        "report": None if stamp is None else plain(stamp),
        "run": _heading(record.heading) | {"curve_run": record.curve_run},
        "curve": _curve(record.curve_id, evaluation),
        "outlying_reading": _outlying(evaluation.outlying),
        "standards": [_standard(s) for s in evaluation.standards],
        "blanks": [plain(b) for b in evaluation.blanks],
        "verdict": _verdict(evaluation, record.definition.concentration_unit),
        "checks": [
            _check(q, evaluation) for q in evaluation.quantities if q.role in ("check", "first-check")
        ],
        "quantities": [
            quantity_json(q)
            | {
                "budget_details": budget_json(q, evaluation),
                "statement": plain(statement_of(record.definition, evaluation.verdict, q)),
            }
            for q in evaluation.quantities
            if q.role in ("unknown", "control")
        ],
        "uncertainty": {
            "left_out": list(evaluation.basis.left_out),
            "past_runs": list(evaluation.basis.runs),
        },
        "amendments": [plain(a) for a in record.amendments],
        "dependent_runs": list(record.dependents),
        "earlier_curves": record.curves_before,
        "attempts_that_day": record.attempts_that_day,
        "versions": dict(record.versions),
        "review": plain(record.review),
        "record_chain": {
            "sequence": stamp.chain_sequence if stamp else record.chain_sequence,
            "head": stamp.chain_head if stamp else record.chain_head,
        },
    }


def preview_json(evaluated: EvaluatedPlan) -> dict[str, Any]:
    """What `calib log --dry-run --json` prints: nothing is in the store, so there are no numbers."""
    plan = evaluated.plan
    return {
        "schema": PREVIEW,
        "file": plan.file.name,
        "fingerprint": plan.file.fingerprint,
        "layout": plan.file.layout,
        "understood": list(plan.file.understood),
        "runs": [
            {
                "instrument": run.instrument.name,
                "method": run.method.name,
                "method_version": run.method.version,
                "at": run.at.isoformat(),
                "operator": run.operator,
                "lot": run.material,
                "notes": list(run.notes),
                "curve": _curve(None, evaluation),
                "outlying_reading": _outlying(evaluation.outlying),
                "standards": [_standard(s) for s in evaluation.standards],
                "verdict": _verdict(evaluation, run.definition.concentration_unit),
                "quantities": [quantity_json(q) for q in evaluation.quantities],
            }
            for run, evaluation in zip(plan.runs, evaluated.evaluations, strict=True)
        ],
    }


def method_json(record: MethodRecord) -> dict[str, Any]:
    """One version of a method with its limits and its own text."""
    definition = record.definition
    return {
        "name": record.name,
        "version": record.version,
        "added_at": record.added_at.isoformat(),
        "added_by": record.added_by,
        "fingerprint": record.fingerprint,
        "analyte": definition.analyte,
        "concentration_unit": definition.concentration_unit,
        "response_unit": definition.response_unit,
        "model": definition.model,
        "preset": definition.preset,
        "limits": {k: plain(v) for k, v in definition.limits.items()},
        "exclusion": plain(definition.exclusion),
        "results": plain(definition.results),
        "checks": plain(definition.checks),
        "specification": plain(definition.specification),
        "needs_check_after": list(definition.needs_check_after),
        "text": record.text,
    }


def rules_json(record: RunRecord, history: ControlHistory) -> dict[str, Any]:
    """What `calib rules --json` prints: the verdict with every rule, what was left out, and the multirule."""
    verdict = record.evaluation.verdict
    return {
        "schema": RULES,
        "run": record.heading.id,
        "curve_run": record.curve_run,
        "method": record.heading.method,
        "method_version": record.heading.method_version,
        "preset": record.definition.preset,
        "decision": verdict.decision,
        "rules": [plain(c) for c in verdict.criteria],
        "excluded": [
            {"label": s.label, "position": s.position, "concentration": s.concentration, "reason": s.reason}
            for s in record.evaluation.standards
            if s.excluded
        ],
        "earlier_curves": record.curves_before,
        "multirule": {
            "signals": [plain(signal) for signal in history.signals],
            "baseline_runs": dict(history.baseline),
        },
    }


def listing_json(schema: str, name: str, rows: Iterable[Any]) -> dict[str, Any]:
    """A list of records under one name."""
    return {"schema": schema, name: [plain(r) for r in rows]}


def plain(value: Any) -> Any:
    """Anything of a record as JSON values; what is not finite becomes null."""
    if isinstance(value, np.ndarray):
        return [plain(v) for v in value.tolist()]
    if isinstance(value, np.generic):
        return plain(value.item())
    if isinstance(value, float):
        return value if math.isfinite(value) else None
    if isinstance(value, datetime | date):
        return value.isoformat()
    if is_dataclass(value) and not isinstance(value, type):
        return {f.name: plain(getattr(value, f.name)) for f in fields(value)}
    if isinstance(value, dict):
        return {str(k): plain(v) for k, v in value.items()}
    if isinstance(value, Sequence) and not isinstance(value, str):
        return [plain(v) for v in value]
    return value


def _heading(heading: RunHeading) -> dict[str, Any]:
    return {
        "id": heading.id,
        "kind": heading.kind,
        "instrument": heading.instrument,
        "method": heading.method,
        "method_version": heading.method_version,
        "at": heading.at.isoformat(),
        "operator": heading.operator,
        "by": heading.by,
        "lot": heading.lot,
        "file": heading.file,
        "fingerprint": heading.fingerprint,
        "layout": heading.layout,
        "void": heading.void_reason,
    }


def _curve(number: int | None, evaluation: Evaluation) -> dict[str, Any]:
    curve = evaluation.curve
    errors = curve.standard_errors
    return {
        "id": number,
        "model": curve.model,
        "noise": curve.noise.label,
        "noise_history": _noise_history(evaluation.history),
        "parameters": {
            name: {"value": plain(value), "u": plain(errors[name])}
            for name, value in curve.parameters.items()
        },
        "parameters_identified": curve.identified,
        "fixed": sorted(curve.fixed),
        "residual_sd": plain(curve.residual_sd),
        "degrees_of_freedom": curve.degrees_of_freedom,
        "interval_scale": plain(curve.scale),
        "interval_degrees_of_freedom": plain(curve.coverage_freedom),
        "r_squared": plain(curve.r_squared),
        "converged": curve.converged,
        "findings": [{"code": f.code, "message": f.message} for f in curve.findings],
    }


def _noise_history(history: NoiseHistory | None) -> dict[str, Any] | None:
    if history is None:
        return None
    noise = history.noise
    return {
        "family": noise.family,
        "function": plain(noise.function.to_dict()),
        "runs": [past.run for past in history.past],
        "curves": [past.curve for past in history.past],
        "readings": noise.readings,
        "pseudo_likelihood_difference": noise.difference,
        "residual_sd": noise.spread.sd,
        "weight": noise.spread.weight,
        "degrees_of_freedom": noise.spread.degrees_of_freedom,
    }


def _outlying(outlying: OutlyingProposal | None) -> dict[str, Any] | None:
    if outlying is None:
        return None
    effects = [plain(e) | {"relative_change": e.relative_change} for e in outlying.effects]
    return {k: v for k, v in plain(outlying).items() if k != "key"} | {
        "reading": f"#{outlying.key}",
        "effects": effects,
    }


def _standard(standard: StandardRecord) -> dict[str, Any]:
    return {
        "label": standard.label,
        "role": standard.role,
        "position": standard.position,
        "concentration": standard.concentration,
        "response": standard.response,
        "absent": standard.absent_cause,
        "back_calculated": standard.back_calculated,
        "relative_error": standard.relative_error,
        "fitted": standard.fitted,
        "excluded": standard.excluded,
        "reason": standard.reason,
        "saturated": standard.saturated,
    }


def _verdict(evaluation: Evaluation, unit: str) -> dict[str, Any]:
    verdict = evaluation.verdict
    return {
        "decision": verdict.decision,
        "criteria": [plain(c) for c in verdict.criteria],
        "calibrated_range": {"lowest": verdict.lowest, "highest": verdict.highest, "unit": unit},
        "r_squared": verdict.r_squared,
    }


def _check(q: QuantityRecord, evaluation: Evaluation) -> dict[str, Any]:
    found = q.concentration if q.concentration is not None else q.estimate
    recovery = found / q.nominal if found is not None and q.nominal else None
    return quantity_json(q) | {
        "budget_details": budget_json(q, evaluation),
        "role": q.role,
        "nominal": q.nominal,
        "recovery": recovery,
    }


def quantity_json(q: QuantityRecord) -> dict[str, Any]:
    """One quantity, full precision."""
    return {
        "sample": q.sample,
        "role": q.role,
        "nominal": q.nominal,
        "concentration": q.concentration,
        "stored_estimate": q.estimate,
        "u": q.u,
        "k": q.k,
        "U": q.expanded,
        "lower": q.lower,
        "upper": q.upper,
        "upper_open": q.upper_open,
        "confidence": q.confidence,
        "kind": q.kind,
        "degrees_of_freedom": q.degrees_of_freedom,
        "replicates": q.replicates,
        "mean_response": q.mean_response,
        "state": q.state,
        "position": q.position,
        "flags": list(q.flags),
        "dilution": q.dilution,
        "unit": q.unit,
        "curve_id": q.curve_id,
        "budget": q.budget,
    }
