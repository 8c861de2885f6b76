"""One run, or all of them in a line each, as the store holds them now."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime, timedelta, timezone
from typing import Any

from sqlalchemy import Select, func, select
from sqlalchemy.orm import Session, aliased

from calib import store as tables
from calib.bench.evaluate import BLANK_ROLES, blank_records, fitted_readings
from calib.bench.find import (
    current_curve,
    facts_of,
    preparation_of,
    require_registered,
    run_numbered,
    void_of,
)
from calib.bench.find_basis import kept_basis
from calib.bench.history import amendments_of
from calib.bench.keeping import (
    current_readings,
    curve_of,
    definition_of,
    exclusions_in_force,
    measured_of,
    standard_records,
    verdict_record,
)
from calib.bench.keeping_quantities import WITHDRAWN, current_quantities, quantity_record
from calib.bench.method_definition import MethodDefinition
from calib.bench.noise_history import history_of
from calib.bench.outlying_readings import outlying_of
from calib.bench.records import Evaluation, LotFacts, Measured, RunHeading, RunRecord
from calib.bench.review_state import review_state
from calib.bench.uncertainty_basis import CURVE_ONLY
from calib.intake import conversion_factor


@dataclass(frozen=True, slots=True)
class RunLine:
    """One run in a list."""

    id: int
    kind: str
    instrument: str
    method: str
    method_version: int
    at: datetime
    operator: str
    file: str
    decision: str | None
    void: bool


def local(at: datetime, offset_minutes: int) -> datetime:
    """The same moment on the clock of the bench."""
    return at.astimezone(timezone(timedelta(minutes=offset_minutes)))


def list_runs(
    store: tables.Store,
    *,
    instrument: str | None = None,
    method: str | None = None,
    last: int | None = None,
) -> tuple[RunLine, ...]:
    """Runs in the order they were measured, void ones marked.

    Parameters
    ----------
    instrument, method : str, optional
        Only these.
    last : int, optional
        Only so many of the latest.

    Raises
    ------
    NotFound
        When there is no such instrument or method.
    """
    with store.reading() as session:
        require_registered(session, instrument, method)
        rows = session.execute(_listing(instrument, method)).all()
    lines = tuple(
        RunLine(
            id=run.id,
            kind=run.kind,
            instrument=instrument_name,
            method=method_name,
            method_version=version,
            at=local(facts.at, facts.offset_minutes),
            operator=facts.operator,
            file=file,
            decision=decision,
            void=voided is not None,
        )
        for run, facts, instrument_name, method_name, version, file, decision, voided in rows
    )
    return lines[-last:] if last else lines


def _listing(instrument: str | None, method: str | None) -> Select[*tuple[Any, ...]]:
    curve = aliased(tables.Curve)
    query = (
        select(
            tables.Run,
            tables.RunFacts,
            tables.Instrument.name,
            tables.Method.name,
            tables.Method.version,
            tables.Original.name,
            tables.VerdictRow.decision,
            tables.RunVoid.id,
        )
        .join(tables.RunFacts, tables.RunFacts.run_id == tables.Run.id)
        .join(tables.Instrument, tables.Instrument.id == tables.RunFacts.instrument_id)
        .join(tables.Method, tables.Method.id == tables.Run.method_id)
        .join(tables.Original, tables.Original.id == tables.Run.original_id)
        .outerjoin(curve, (curve.run_id == tables.Run.id) & tables.is_current(curve))
        .outerjoin(tables.VerdictRow, tables.VerdictRow.curve_id == curve.id)
        .outerjoin(tables.RunVoid, tables.RunVoid.run_id == tables.Run.id)
        .where(tables.is_current(tables.RunFacts))
        .order_by(tables.RunFacts.at, tables.Run.id)
    )
    if instrument:
        query = query.where(tables.Instrument.name == instrument)
    if method:
        query = query.where(tables.Method.name == method)
    return query


def show_run(store: tables.Store, number: int) -> RunRecord:
    """Everything about one run, as it stands now.

    Raises
    ------
    NotFound
        When there is no such run.
    """
    with store.reading() as session:
        return load_run(session, number, store.head())


def load_run(session: Session, number: int, head: tuple[int, str]) -> RunRecord:
    """Read a run with its curve, verdict, quantities and later decisions."""
    run = run_numbered(session, number)
    facts = facts_of(session, number)
    method = session.get_one(tables.Method, run.method_id)
    definition = definition_of(method)
    curve_row = curve_in_use(session, run)
    source = session.get_one(tables.Run, curve_row.run_id)
    measured = measured_run(session, source, definition)
    own = measured if source.id == run.id else measured_run(session, run, definition)
    evaluation = stored_evaluation(session, run, curve_row, definition, measured, own)
    return RunRecord(
        heading=heading_of(session, run, method),
        definition=definition,
        curve_id=curve_row.id,
        curve_run=curve_row.run_id,
        evaluation=evaluation,
        readings=own,
        amendments=amendments_of(session, run),
        dependents=dependents_of(session, run.id),
        curves_before=_curves_before(session, curve_row.run_id),
        attempts_that_day=attempts_on_day(
            session, facts.instrument_id, method.name, local(facts.at, facts.offset_minutes)
        ),
        versions=dict(curve_row.versions),
        lot=_lot_facts_of(session, facts),
        chain_sequence=head[0],
        chain_head=head[1],
        review=review_state(session, number),
    )


def curve_in_use(session: Session, run: tables.Run) -> tables.Curve:
    """Curve in force of a run, or of the run whose curve it uses."""
    own = current_curve(session, run.id)
    if own is not None:
        return own
    used = session.get_one(tables.Curve, run.curve_id)
    return current_curve(session, used.run_id) or used


def measured_run(session: Session, run: tables.Run, definition: MethodDefinition) -> tuple[Measured, ...]:
    """Readings of a run in the method's units, with exclusions and saturation."""
    instrument = session.get_one(tables.Instrument, facts_of(session, run.id).instrument_id)
    return measured_of(
        current_readings(session, run.id),
        conversion_factor(run.concentration_unit, definition.concentration_unit),
        instrument.response_ceiling,
        exclusions_in_force(session, run.id),
    )


def stored_evaluation(
    session: Session,
    run: tables.Run,
    curve_row: tables.Curve,
    definition: MethodDefinition,
    measured: tuple[Measured, ...],
    own: tuple[Measured, ...],
) -> Evaluation:
    """The evaluation a curve and a run's quantities stand for; nothing is fitted again."""
    by_ordinal = {m.key: m for m in measured}
    ordinals = session.execute(
        select(tables.Reading.id, tables.Reading.ordinal).where(tables.Reading.run_id == curve_row.run_id)
    ).all()
    by_row = {i: by_ordinal[ordinal] for i, ordinal in ordinals}
    rows = session.scalars(
        select(tables.CurveStandard)
        .where(tables.CurveStandard.curve_id == curve_row.id)
        .order_by(tables.CurveStandard.id)
    ).all()
    standards = standard_records(rows, by_row)
    kept = {by_row[r.reading_id].key for r in rows if r.fitted}
    curve = curve_of(
        curve_row,
        [m for m in fitted_readings(definition, measured) if m.role in BLANK_ROLES or m.key in kept],
    )
    verdict = session.scalars(
        select(tables.VerdictRow).where(tables.VerdictRow.curve_id == curve_row.id)
    ).one()
    quantities = tuple(
        quantity_record(q) for q in current_quantities(session, run.id) if WITHDRAWN not in q.flags
    )
    blanks = blank_records(curve, own)
    return Evaluation(
        curve,
        standards,
        blanks,
        verdict_record(verdict),
        quantities,
        history=history_of(curve_row),
        outlying=outlying_of(curve_row),
        basis=kept_basis(session, run.id) or CURVE_ONLY,
    )


def heading_of(session: Session, run: tables.Run, method: tables.Method) -> RunHeading:
    """Who, what, where and when."""
    facts = facts_of(session, run.id)
    instrument = session.get_one(tables.Instrument, facts.instrument_id)
    original = session.get_one(tables.Original, run.original_id)
    lot = _lot_facts_of(session, facts)
    void = void_of(session, run.id)
    return RunHeading(
        id=run.id,
        kind=run.kind,
        instrument=instrument.name,
        instrument_kind=instrument.kind,
        serial=instrument.serial,
        location=instrument.location,
        method=method.name,
        method_version=method.version,
        at=local(facts.at, facts.offset_minutes),
        operator=facts.operator,
        by=run.logged_by,
        lot=lot.used if lot else None,
        file=original.name,
        fingerprint=original.fingerprint,
        layout=run.layout,
        concentration_unit=run.concentration_unit,
        response_unit=run.response_unit,
        void_reason=void.reason if void else None,
    )


def attempts_on_day(session: Session, instrument_id: int, method: str, at: datetime) -> int:
    """Calibration runs of one instrument and method on the local day of ``at``."""
    start = at.replace(hour=0, minute=0, second=0, microsecond=0)
    query = (
        select(func.count())
        .select_from(tables.Run)
        .join(tables.RunFacts, tables.RunFacts.run_id == tables.Run.id)
        .join(tables.Method, tables.Method.id == tables.Run.method_id)
        .where(
            tables.Run.kind == "calibration",
            tables.Method.name == method,
            tables.RunFacts.instrument_id == instrument_id,
            tables.RunFacts.at >= start,
            tables.RunFacts.at < start + timedelta(days=1),
            tables.is_current(tables.RunFacts),
        )
    )
    return int(session.scalar(query) or 0)


def dependents_of(session: Session, run_id: int) -> tuple[int, ...]:
    """Runs of unknowns that were read on a curve of this run."""
    query = (
        select(tables.Run.id)
        .join(tables.Curve, tables.Curve.id == tables.Run.curve_id)
        .where(tables.Curve.run_id == run_id)
        .order_by(tables.Run.id)
    )
    return tuple(session.scalars(query))


def _lot_facts_of(session: Session, facts: tables.RunFacts) -> LotFacts | None:
    if facts.lot_id is None:
        return None
    return lot_facts(session.get_one(tables.StandardLot, facts.lot_id), preparation_of(session, facts))


def lot_facts(lot: tables.StandardLot, prepared: tables.Preparation | None = None) -> LotFacts:
    """What the certificate of a lot says, and which solution prepared from it was used."""
    return LotFacts(
        lot.name,
        lot.material,
        lot.certified_value,
        lot.unit,
        lot.expanded_uncertainty,
        lot.coverage_factor,
        prepared.expiry if prepared else lot.expiry,
        lot.certificate,
        prepared.name if prepared else None,
    )


def _curves_before(session: Session, run_id: int) -> int:
    count = session.scalar(select(func.count()).where(tables.Curve.run_id == run_id))
    return int(count or 1) - 1
