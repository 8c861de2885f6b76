"""Log a file of standards: fit, judge, quantify, write in one transaction."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from datetime import datetime

from sqlalchemy import select
from sqlalchemy.orm import Session

from calib import store as tables
from calib.bench.evaluate import with_basis
from calib.bench.find_basis import keep_basis
from calib.bench.keeping import add_evaluation, versions
from calib.bench.keeping_quantities import add_first_quantities
from calib.bench.noise_history import refuse_changed_history
from calib.bench.outlying_readings import evaluate_and_check
from calib.bench.plan_run import LogPlan, PlannedRun, refuse_duplicates
from calib.bench.records import Evaluation, RunHeading, RunRecord
from calib.bench.show_run import attempts_on_day, local, lot_facts, show_run
from calib.errors import InputError
from calib.intake import READER_VERSION, ParsedFile


@dataclass(frozen=True, slots=True)
class EvaluatedPlan:
    """A plan with the evaluation of each of its runs; still nothing is written."""

    plan: LogPlan
    evaluations: tuple[Evaluation, ...]


def evaluate_plan(plan: LogPlan) -> EvaluatedPlan:
    """Fit, judge and quantify every run of a plan.

    Raises
    ------
    InputError
        When a run has no standards.
    """
    for run in plan.runs:
        if not run.has_standards:
            raise InputError(
                f"{plan.file.name}: no standards in it; unknowns alone belong to calib quantify, "
                "which reads them on the curve in force"
            )
    found = ((r, evaluate_and_check(r.definition, r.measured, r.history)) for r in plan.runs)
    return EvaluatedPlan(plan, tuple(with_basis(r.definition, r.measured, e, r.basis) for r, e in found))


def log_plan(store: tables.Store, evaluated: EvaluatedPlan) -> tuple[RunRecord, ...]:
    """Write an evaluated file; all its runs or none.

    Raises
    ------
    DuplicateFile
        When another program logged the same readings meanwhile.
    InputError
        When the past runs the noise model was pooled over changed meanwhile.
    """
    plan = evaluated.plan
    now = store.now()
    with store.change(action="log run", by=plan.by) as session:
        refuse_duplicates(session, plan.file, plan.runs)
        for run in plan.runs:
            refuse_changed_history(session, run.instrument.name, run.definition, run.at, run.history)
        original_id = add_original(session, plan.file, now)
        name = session.get_one(tables.Original, original_id).name
        written = [
            _write(session, plan, run, evaluation, original_id, now)
            for run, evaluation in zip(plan.runs, evaluated.evaluations, strict=True)
        ]
        attempts = [attempts_on_day(session, run.instrument.id, run.method.name, run.at) for run in plan.runs]
    if any(run.overrides or any(m.excluded is not None for m in run.measured) for run in plan.runs):
        return tuple(show_run(store, number) for number, _ in written)  # decisions belong to the record
    head = store.head()
    return tuple(
        _logged_record(plan, run, evaluation, name, numbers, tries, head)
        for run, evaluation, numbers, tries in zip(
            plan.runs, evaluated.evaluations, written, attempts, strict=True
        )
    )


def _logged_record(
    plan: LogPlan,
    run: PlannedRun,
    evaluation: Evaluation,
    file: str,
    numbers: tuple[int, int],
    attempts: int,
    head: tuple[int, str],
) -> RunRecord:
    """The record of a run just written, as `show_run` would read it; saves a dozen queries."""
    run_id, curve_id = numbers
    quantities = tuple(replace(q, curve_id=curve_id) for q in evaluation.quantities)
    return RunRecord(
        heading=_logged_heading(plan, run, run_id, file),
        definition=run.definition,
        curve_id=curve_id,
        curve_run=run_id,
        evaluation=replace(evaluation, quantities=quantities),
        readings=run.measured,
        amendments=(),
        dependents=(),
        curves_before=len(evaluation.before),
        attempts_that_day=attempts,
        versions=versions(),
        lot=lot_facts(run.lot, run.prepared) if run.lot else None,
        chain_sequence=head[0],
        chain_head=head[1],
    )


def _logged_heading(plan: LogPlan, run: PlannedRun, run_id: int, file: str) -> RunHeading:
    return RunHeading(
        id=run_id,
        kind="calibration",
        instrument=run.instrument.name,
        instrument_kind=run.instrument.kind,
        serial=run.instrument.serial,
        location=run.instrument.location,
        method=run.method.name,
        method_version=run.method.version,
        at=local(run.at, run.offset_minutes),
        operator=run.operator,
        by=plan.by,
        lot=run.material,
        file=file,
        fingerprint=plan.file.fingerprint,
        layout=plan.file.layout,
        concentration_unit=run.parsed.concentration_unit,
        response_unit=run.parsed.response_unit,
    )


def add_original(session: Session, file: ParsedFile, now: datetime) -> int:
    """Keep the bytes of a file; a file that is there already is named again."""
    known = session.scalar(select(tables.Original.id).where(tables.Original.fingerprint == file.fingerprint))
    if known is not None:
        return known
    row = tables.Original(
        fingerprint=file.fingerprint, name=file.name, size=file.size, content=file.content, imported_at=now
    )
    session.add(row)
    session.flush()
    return row.id


def _write(
    session: Session,
    plan: LogPlan,
    run: PlannedRun,
    evaluation: Evaluation,
    original_id: int,
    now: datetime,
) -> tuple[int, int]:
    run_id = add_run(session, plan, run, original_id, now)
    reading_ids = add_readings(session, run_id, run)
    session.add_all(
        tables.Exclusion(
            reading_id=reading_ids[reading.key],
            decision="exclude",
            reason_class="assignable cause",
            reason=reading.excluded,
            by=plan.by,
            at=now,
        )
        for reading in run.measured
        if reading.excluded is not None
    )
    session.add_all(
        tables.RuleOverride(run_id=run_id, what=o.what, reason=o.reason, by=plan.by, at=now)
        for o in run.overrides
    )
    curve_id = add_evaluation(session, run_id, evaluation, reading_ids, by=plan.by, at=now)
    add_first_quantities(session, run_id, curve_id, evaluation.quantities)
    keep_basis(session, run_id, evaluation.basis, by=plan.by, at=now)
    return run_id, curve_id


def add_run(
    session: Session,
    plan: LogPlan,
    run: PlannedRun,
    original_id: int,
    now: datetime,
    curve_id: int | None = None,
) -> int:
    """Write a run with its facts; ``curve_id`` is the curve a run of unknowns uses."""
    row = tables.Run(
        kind="calibration" if curve_id is None else "unknowns",
        original_id=original_id,
        method_id=run.method.id,
        layout=plan.file.layout,
        reader_version=str(READER_VERSION),
        concentration_unit=run.parsed.concentration_unit,
        response_unit=run.parsed.response_unit,
        content_fingerprint=run.content_fingerprint,
        curve_id=curve_id,
        logged_at=now,
        logged_by=plan.by,
    )
    session.add(row)
    session.flush()
    facts = tables.RunFacts(
        run_id=row.id,
        instrument_id=run.instrument.id,
        lot_id=run.lot.id if run.lot else None,
        at=run.at,
        offset_minutes=run.offset_minutes,
        operator=run.operator,
        by=plan.by,
        recorded_at=now,
    )
    session.add(facts)
    if run.prepared:
        session.flush()
        session.add(tables.RunSolution(facts_id=facts.id, preparation_id=run.prepared.id))
    return row.id


def add_readings(session: Session, run_id: int, run: PlannedRun) -> Mapping[int, int]:
    """Write the readings of a run; numbers of the rows by ordinal."""
    rows = [
        tables.Reading(
            run_id=run_id,
            ordinal=ordinal,
            sample=reading.sample,
            role=str(reading.role),
            concentration=reading.concentration,
            response=reading.response,
            response_text=reading.response_text,
            absent_cause=reading.absent_cause,
            replicate=reading.replicate,
            dilution=reading.dilution,
            position=reading.position,
            at=reading.at
            if reading.at is None or reading.at.tzinfo
            else reading.at.replace(tzinfo=run.at.tzinfo),
            sheet=reading.place.sheet,
            row=reading.place.row,
            column=reading.place.column,
            internal_standard=reading.internal_standard,
        )
        for ordinal, reading in enumerate(run.parsed.readings, start=1)
    ]
    session.add_all(rows)
    session.flush()
    return {row.ordinal: row.id for row in rows}
