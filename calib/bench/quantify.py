"""Unknowns measured later: read on the latest accepted curve still in force."""

from __future__ import annotations

from datetime import datetime, timedelta

from sqlalchemy import select
from sqlalchemy.orm import Session

from calib import store as tables
from calib.bench.curve_life import refuse_unchecked
from calib.bench.find import current_curve, facts_of, run_numbered
from calib.bench.find_basis import find_basis, keep_basis, request_for
from calib.bench.formed_results import curve_run
from calib.bench.keeping_quantities import add_first_quantities
from calib.bench.log_run import add_original, add_readings, add_run
from calib.bench.plan_run import LogPlan, PlannedRun, refuse_duplicates
from calib.bench.quantities import quantities_of
from calib.bench.records import QuantityRecord, RunRecord
from calib.bench.show_run import dependents_of, load_run, local, show_run
from calib.bench.uncertainty_basis import CURVE_ONLY, UncertaintyBasis
from calib.errors import InputError

QUANTIFIED_ROLES = ("unknown", "control", "check", "first-check")


def quantify_plan(store: tables.Store, plan: LogPlan) -> tuple[RunRecord, ...]:
    """Quantify the unknowns of a planned file and write them as runs that name their curve.

    Raises
    ------
    InputError
        When the file holds standards, no accepted curve is in force, or the curve needs a check.
    """
    for run in plan.runs:
        if run.has_standards:
            raise InputError(f"{plan.file.name}: it holds standards; log it with calib log")
    with store.reading() as session:
        curves = [curve_in_force(session, run) for run in plan.runs]
        sources = [load_run(session, c.run_id, (0, "")) for c in curves]
        for run, source in zip(plan.runs, sources, strict=True):
            refuse_unchecked(session, run, source)
        bases = [_basis(session, source, run) for source, run in zip(sources, plan.runs, strict=True)]
    results = [quantify_on(*each) for each in zip(sources, plan.runs, bases, strict=True)]
    now = store.now()
    numbers = []
    with store.change(action="quantify unknowns", by=plan.by) as session:
        refuse_duplicates(session, plan.file, plan.runs)
        original_id = add_original(session, plan.file, now)
        for i, (run, curve) in enumerate(zip(plan.runs, curves, strict=True)):
            refuse_unchecked(session, run, sources[i])
            number = _write(session, plan, run, curve, results[i], original_id, now)
            keep_basis(session, number, bases[i], by=plan.by, at=now)
            numbers.append(number)
    return tuple(show_run(store, n) for n in numbers)


def _basis(session: Session, source: RunRecord, run: PlannedRun) -> UncertaintyBasis:
    """What is known beside reading and curve: the lot of the curve, and its age where it is of another day."""
    facts = facts_of(session, source.heading.id or 0)
    levels = [s.concentration for s in source.evaluation.standards]
    return find_basis(session, request_for(session, source.definition, facts, levels, run.at))


def quantify_on(
    source: RunRecord, run: PlannedRun, basis: UncertaintyBasis = CURVE_ONLY
) -> tuple[QuantityRecord, ...]:
    """Quantities of a planned run on the curve of another run."""
    verdict = source.evaluation.verdict
    return quantities_of(
        source.definition,
        source.evaluation.curve,
        verdict.accepted,
        [m for m in run.measured if m.role in QUANTIFIED_ROLES],
        verdict.lowest,
        verdict.highest,
        of_curve=curve_run(source.readings),
        basis=basis,
    )


def curve_in_force(session: Session, run: PlannedRun) -> tables.Curve:
    """Latest accepted curve of the instrument and method that is still valid at the run's time.

    Raises
    ------
    InputError
        When there is none, when a later curve was rejected (nobody goes back to an older
        curve because the new one failed), or when the method has a new version since.
    """
    latest = session.execute(
        select(tables.Run, tables.RunFacts, tables.VerdictRow.decision)
        .join(tables.RunFacts, tables.RunFacts.run_id == tables.Run.id)
        .join(tables.Method, tables.Method.id == tables.Run.method_id)
        .join(tables.Curve, tables.Curve.run_id == tables.Run.id)
        .join(tables.VerdictRow, tables.VerdictRow.curve_id == tables.Curve.id)
        .outerjoin(tables.RunVoid, tables.RunVoid.run_id == tables.Run.id)
        .where(
            tables.Run.kind == "calibration",
            tables.RunFacts.instrument_id == run.instrument.id,
            tables.Method.name == run.method.name,
            tables.RunFacts.at <= run.at,
            tables.RunVoid.id.is_(None),
            tables.is_current(tables.RunFacts),
            tables.is_current(tables.Curve),
        )
        .order_by(tables.RunFacts.at.desc(), tables.Run.id.desc())
        .limit(1)
    ).first()
    where = f"{run.instrument.name} and method {run.method.name}"
    if latest is None:
        raise InputError(f"no curve of {where} is logged before {run.at:%Y-%m-%d %H:%M}; log standards first")
    source, facts, decision = latest
    measured = local(facts.at, facts.offset_minutes)
    if decision == "rejected":
        raise InputError(
            f"the latest curve of {where} (run {source.id}, {measured:%Y-%m-%d %H:%M}) was rejected; "
            "log new standards: an older curve is not taken instead"
        )
    if source.method_id != run.method.id:
        raise InputError(
            f"the latest curve of {where} (run {source.id}, {measured:%Y-%m-%d %H:%M}) was judged under another "
            f"version of the method than {run.method.version}, the present one; log new standards"
        )
    _refuse_expired(run, source, facts.at, measured)
    curve = current_curve(session, source.id)
    if curve is None:
        raise InputError(f"run {source.id} has no curve; log new standards")
    return curve


def _refuse_expired(run: PlannedRun, source: tables.Run, at: datetime, shown: datetime) -> None:
    expires = at + timedelta(hours=run.definition.valid_hours)
    if run.at > expires:
        raise InputError(
            f"the curve of run {source.id} ({shown:%Y-%m-%d %H:%M}) was valid for "
            f"{run.definition.valid_hours:g} h, until {local(expires, run.offset_minutes):%Y-%m-%d %H:%M}, "
            f"and these samples were measured {run.at:%Y-%m-%d %H:%M}; log new standards"
        )


def _write(
    session: Session,
    plan: LogPlan,
    run: PlannedRun,
    curve: tables.Curve,
    quantities: tuple[QuantityRecord, ...],
    original_id: int,
    now: datetime,
) -> int:
    still = curve_in_force(session, run)
    if still.id != curve.id:
        raise InputError(f"{plan.file.name}: the curve in force changed meanwhile; run the command again")
    run_id = add_run(session, plan, run, original_id, now, curve_id=curve.id)
    add_readings(session, run_id, run)
    add_first_quantities(session, run_id, curve.id, quantities)
    return run_id


def dependent_runs(session: Session, run_id: int) -> list[int]:
    """Runs of unknowns that were read on any curve of this run."""
    run_numbered(session, run_id)
    return list(dependents_of(session, run_id))
