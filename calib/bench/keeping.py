"""Between evaluations and rows: how a run is written to the store and read back."""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import asdict
from datetime import datetime
from typing import Any

import numpy as np
from sqlalchemy import select
from sqlalchemy.orm import Session

from calib import store as tables
from calib.acceptance import CriterionResult
from calib.bench.acceptance_settings import preset_of_early_method
from calib.bench.evidence import finite
from calib.bench.method_definition import MethodDefinition, read_definition
from calib.bench.records import (
    Evaluation,
    Measured,
    StandardRecord,
    VerdictRecord,
)
from calib.curves.curve import Curve
from calib.curves.diagnostics import Finding
from calib.curves.noise import noise_from_dict
from calib.curves.standards import Standards, frozen
from calib.models import response_model

OUTLYING = "outlying"


def versions() -> dict[str, Any]:
    """Versions of everything that takes part in the numbers."""
    import numpy
    import scipy

    from calib import __version__

    return {"calib": __version__, "numpy": numpy.__version__, "scipy": scipy.__version__}


def add_evaluation(
    session: Session,
    run_id: int,
    evaluation: Evaluation,
    reading_ids: Mapping[int, int],
    *,
    by: str,
    at: datetime,
    supersedes: int | None = None,
    reason: str | None = None,
) -> int:
    """Write curve, standards and verdict; ``reading_ids`` by ordinal. The number of the new curve.

    Earlier curves of the exclusion rule are written first, each superseded by the next.
    """
    for number, stage in enumerate(evaluation.before, start=1):
        supersedes = _add_curve(session, run_id, stage, reading_ids, by, at, supersedes, reason)
        reason = f"exclusion rule of the method, step {number}"
    return _add_curve(session, run_id, evaluation, reading_ids, by, at, supersedes, reason)


def _add_curve(
    session: Session,
    run_id: int,
    evaluation: Evaluation,
    reading_ids: Mapping[int, int],
    by: str,
    at: datetime,
    supersedes: int | None,
    reason: str | None,
) -> int:
    row = _curve_row(run_id, evaluation, by, at)
    row.supersedes, row.reason = supersedes, reason
    session.add(row)
    session.flush()
    session.add_all(_standard_row(row.id, reading_ids[s.key], s) for s in evaluation.standards)
    session.add(_verdict_row(row.id, evaluation.verdict, by, at))
    return row.id


def current_readings(session: Session, run_id: int) -> Sequence[tables.Reading]:
    """Readings of a run that are in force, in the order of the file."""
    query = select(tables.Reading).where(tables.Reading.run_id == run_id, tables.is_current(tables.Reading))
    return session.scalars(query.order_by(tables.Reading.ordinal)).all()


def exclusions_in_force(session: Session, run_id: int) -> dict[int, tables.Exclusion]:
    """Latest decision on each reading ever excluded, by the reading's ordinal."""
    query = (
        select(tables.Reading.ordinal, tables.Exclusion)
        .join(tables.Exclusion, tables.Exclusion.reading_id == tables.Reading.id)
        .where(tables.Reading.run_id == run_id, tables.is_current(tables.Exclusion))
    )
    return {row[0]: row[1] for row in session.execute(query)}


def measured_of(
    rows: Iterable[tables.Reading],
    factor: float,
    ceiling: float | None,
    exclusions: dict[int, tables.Exclusion],
) -> tuple[Measured, ...]:
    """Readings as the evaluation sees them, nominal values times ``factor``."""
    return tuple(_measured(r, factor, ceiling, exclusions.get(r.ordinal)) for r in rows)


def _measured(
    row: tables.Reading, factor: float, ceiling: float | None, exclusion: tables.Exclusion | None
) -> Measured:
    out = exclusion is not None and exclusion.decision == "exclude"
    return Measured(
        key=row.ordinal,
        sample=row.sample,
        role=row.role,
        concentration=None if row.concentration is None else row.concentration * factor,
        response=row.response,
        absent_cause=row.absent_cause,
        dilution=row.dilution,
        position=row.position,
        excluded=exclusion.reason if out and exclusion is not None else None,
        saturated=is_saturated(row.response, row.absent_cause, ceiling),
        outlying=_outlying(exclusion),
        place=", ".join(
            f"{word} {value}"
            for word, value in (("sheet", row.sheet), ("row", row.row), ("column", row.column))
            if value is not None
        ),
        internal_standard=row.internal_standard,
    )


def _outlying(exclusion: tables.Exclusion | None) -> str | None:
    if exclusion is None or exclusion.reason_class != OUTLYING:
        return None
    return "excluded" if exclusion.decision == "exclude" else "restored"


def is_saturated(response: float | None, absent_cause: str | None, ceiling: float | None) -> bool:
    """Whether the detector was at its ceiling or said so."""
    if absent_cause == "overflow":
        return True
    return response is not None and ceiling is not None and response >= ceiling


def curve_of(row: tables.Curve, standards: Sequence[Measured]) -> Curve:
    """The fitted curve a row stands for; ``standards`` are the readings it was fitted to."""
    model = response_model(row.model)
    noise = noise_from_dict(row.noise)
    free = np.array([n not in row.fixed for n in model.names])
    nu = int(row.degrees_of_freedom)
    total = _number(row.residual_sum)
    scale, freedom = (float(v) for v in noise.scale(total, nu))
    return Curve(
        response_model=model,
        values=frozen(np.array([_number(row.parameters[n]) for n in model.names])),
        free=free,
        lower=frozen(np.array([_bound(row.bounds, n, 0, -np.inf) for n in model.names])),
        upper=frozen(np.array([_bound(row.bounds, n, 1, np.inf) for n in model.names])),
        covariance=frozen(np.array([[_number(v) for v in line] for line in row.covariance])),
        noise=noise,
        standards=Standards(
            frozen(np.array([s.concentration or 0.0 for s in standards])),
            frozen(np.array([_number(s.response) for s in standards])),
        ),
        residual_sum=total,
        degrees_of_freedom=nu,
        scale=scale,
        coverage_freedom=freedom,
        r_squared=_number(row.r_squared),
        aicc=_number(row.aicc),
        determined=np.array([n not in row.undetermined for n in model.names]),
        converged=row.converged,
        findings=tuple(Finding(f["code"], f["message"]) for f in row.findings),
        solver=row.solver,
    )


def standard_records(
    rows: Iterable[tables.CurveStandard], measured: Mapping[int, Measured]
) -> tuple[StandardRecord, ...]:
    """Standards of a stored curve; ``measured`` by the number of the reading's row."""
    return tuple(_standard_record(row, measured[row.reading_id]) for row in rows)


def _standard_record(row: tables.CurveStandard, reading: Measured) -> StandardRecord:
    return StandardRecord(
        key=reading.key,
        label=reading.sample,
        role=reading.role,
        position=reading.position,
        concentration=reading.concentration or 0.0,
        response=reading.response,
        absent_cause=reading.absent_cause,
        fitted=row.fitted,
        back_calculated=row.back_calculated,
        relative_error=row.relative_error,
        excluded=row.excluded,
        reason=row.reason,
        saturated=reading.saturated,
    )


def verdict_record(row: tables.VerdictRow) -> VerdictRecord:
    """The verdict a row stands for."""
    criteria = tuple(CriterionResult(**c) for c in row.criteria)
    return VerdictRecord(row.decision, criteria, row.lowest, row.highest, row.r_squared)


def _curve_row(run_id: int, evaluation: Evaluation, by: str, at: datetime) -> tables.Curve:
    curve, history = evaluation.curve, evaluation.history
    pairs = zip(curve.response_model.names, curve.lower, curve.upper, strict=True)
    return tables.Curve(
        run_id=run_id,
        model=curve.model,
        fixed=curve.fixed,
        bounds={n: [finite(float(low)), finite(float(high))] for n, low, high in pairs},
        noise=curve.noise.to_dict(),
        outlying=None if evaluation.outlying is None else asdict(evaluation.outlying),
        noise_from=None if history is None else [asdict(past) for past in history.past],
        parameters={n: finite(v) for n, v in curve.parameters.items()},
        covariance=[[finite(float(v)) for v in line] for line in curve.covariance],
        undetermined=[n for n, d in zip(curve.response_model.names, curve.determined, strict=True) if not d],
        residual_sum=finite(curve.residual_sum),
        residual_sd=finite(curve.residual_sd),
        degrees_of_freedom=curve.degrees_of_freedom,
        r_squared=finite(curve.r_squared),
        aicc=finite(curve.aicc),
        converged=curve.converged,
        findings=[{"code": f.code, "message": f.message} for f in curve.findings],
        solver=curve.solver,
        versions=versions(),
        lowest=evaluation.verdict.lowest,
        highest=evaluation.verdict.highest,
        by=by,
        at=at,
    )


def _standard_row(curve_id: int, reading_id: int, standard: StandardRecord) -> tables.CurveStandard:
    return tables.CurveStandard(
        curve_id=curve_id,
        reading_id=reading_id,
        fitted=standard.fitted,
        back_calculated=standard.back_calculated,
        relative_error=standard.relative_error,
        excluded=standard.excluded,
        reason=standard.reason,
    )


def _verdict_row(curve_id: int, verdict: VerdictRecord, by: str, at: datetime) -> tables.VerdictRow:
    return tables.VerdictRow(
        curve_id=curve_id,
        decision=verdict.decision,
        criteria=[_criterion(c) for c in verdict.criteria],
        lowest=verdict.lowest,
        highest=verdict.highest,
        r_squared=verdict.r_squared,
        by=by,
        at=at,
    )


def _criterion(result: CriterionResult) -> dict[str, Any]:
    observed = None if result.observed is None else finite(result.observed)
    return asdict(result) | {"observed": observed, "passed": bool(result.passed)}


def _number(value: float | None) -> float:
    return math.nan if value is None else float(value)


def _bound(bounds: dict[str, Any], name: str, side: int, default: float) -> float:
    value = bounds[name][side]
    return default if value is None else float(value)


def definition_of(row: tables.Method) -> MethodDefinition:
    """The definition a method version stands for."""
    preset = preset_of_early_method(row.definition) if row.preset is None else row.preset
    return read_definition(row.definition, row.version, preset)
