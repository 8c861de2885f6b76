"""A curve after an event on its instrument: it needs a passing check before it is used again."""

from __future__ import annotations

from datetime import datetime

from sqlalchemy import select
from sqlalchemy.orm import Session

from calib import store as tables
from calib.acceptance.limits import within
from calib.bench.evidence import read_back
from calib.bench.formed_results import CHECKS, in_sequence
from calib.bench.method_definition import MethodDefinition
from calib.bench.plan_run import PlannedRun
from calib.bench.records import RunRecord
from calib.bench.show_run import local
from calib.errors import InputError


def refuse_unchecked(session: Session, run: PlannedRun, source: RunRecord) -> None:
    """Refuse a curve that had an event since it was measured and no passing check after it.

    A check counts when it is in a run of unknowns measured since the event, or in the run at hand
    before its first sample.

    Source: 42 CFR 493.1255(b)(3) (verified); ISO/IEC 17025:2017, 6.4.10 (from memory).

    Raises
    ------
    InputError
        Naming the event.
    """
    event = _last_event(session, run, source)
    if event is None:
        return
    if _checked_here(run, source) or _checked_since(session, run, source, event.at):
        return
    raise InputError(
        f"the curve of run {source.heading.id} needs a check: {local(event.at, event.offset_minutes):%Y-%m-%d %H:%M} "
        f"{event.what} ({event.kind}); measure a check standard before the samples, or log new standards"
    )


def _last_event(session: Session, run: PlannedRun, source: RunRecord) -> tables.Event | None:
    return session.scalar(
        select(tables.Event)
        .where(
            tables.Event.instrument_id == run.instrument.id,
            tables.Event.kind.in_(run.definition.needs_check_after),
            tables.Event.at > source.heading.at,
            tables.Event.at <= run.at,
        )
        .order_by(tables.Event.at.desc(), tables.Event.id.desc())
        .limit(1)
    )


def _checked_here(run: PlannedRun, source: RunRecord) -> bool:
    """Whether checks come before the first sample and all of them pass."""
    first = []
    for reading in in_sequence(run.measured):
        if reading.role == "unknown":
            break
        if reading.role in CHECKS:
            first.append(reading)
    found = read_back(source.evaluation.curve, [r.response for r in first])
    return bool(first) and all(
        value is not None
        and r.concentration is not None
        and _passes(run.definition, r.role, value * r.dilution, r.concentration)
        for r, value in zip(first, found, strict=True)
    )


def _checked_since(session: Session, run: PlannedRun, source: RunRecord, since: datetime) -> bool:
    """Whether the checks of the latest run on this curve since the event all passed."""
    row = tables.QuantityRow
    checks = session.execute(
        select(row.run_id, row.role, row.concentration, row.nominal)
        .join(tables.RunFacts, tables.RunFacts.run_id == row.run_id)
        .where(
            row.curve_id == source.curve_id,
            row.role.in_(CHECKS),
            tables.is_current(row),
            tables.is_current(tables.RunFacts),
            tables.RunFacts.at >= since,
            tables.RunFacts.at <= run.at,
        )
        .order_by(tables.RunFacts.at.desc(), row.run_id.desc())
    ).all()
    latest = [check for check in checks if check.run_id == checks[0].run_id]
    return bool(latest) and all(
        c.concentration is not None
        and c.nominal
        and _passes(run.definition, c.role, c.concentration, c.nominal)
        for c in latest
    )


def _passes(definition: MethodDefinition, role: str, found: float, nominal: float) -> bool:
    limit = definition.limits.get(CHECKS[role]) or definition.limits.get("check_recovery")
    return limit is not None and nominal > 0 and within(found / nominal - 1.0, limit.value)
