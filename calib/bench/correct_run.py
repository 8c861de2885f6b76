"""Corrections of a run: each supersedes with reason, person and time; nothing is overwritten."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from datetime import datetime

from sqlalchemy.orm import Session

from calib import store as tables
from calib.bench.evaluate import with_basis
from calib.bench.find import (
    current_curve,
    run_numbered,
    void_of,
)
from calib.bench.find_readings import find_readings
from calib.bench.formed_results import CurveRun, curve_run
from calib.bench.keeping import OUTLYING, add_evaluation, current_readings, exclusions_in_force
from calib.bench.keeping_quantities import add_quantities
from calib.bench.outlying_readings import evaluate_and_check, refuse_outlying, stays_noisy
from calib.bench.quantify import QUANTIFIED_ROLES, dependent_runs
from calib.bench.quantities import quantities_of
from calib.bench.records import Evaluation, Measured, QuantityRecord, RunRecord
from calib.bench.show_run import load_run, measured_run, show_run
from calib.errors import InputError
from calib.store.runs import REASON_CLASSES


def exclude_readings(
    store: tables.Store,
    number: int,
    which: Sequence[str],
    *,
    reason: str,
    reason_class: str = "other",
    by: str,
) -> RunRecord:
    """Leave standard readings out of the fit and judge the run again.

    Raises
    ------
    InputError
        When a reading is not found, is no standard, is excluded already, or no reason is given.
    """
    return _decide(store, number, which, "exclude", reason, reason_class, by)


def restore_readings(
    store: tables.Store,
    number: int,
    which: Sequence[str],
    *,
    reason: str,
    reason_class: str = "other",
    by: str,
) -> RunRecord:
    """Take excluded readings back into the fit and judge the run again."""
    return _decide(store, number, which, "restore", reason, reason_class, by)


def refit_run(store: tables.Store, number: int, *, reason: str, by: str) -> RunRecord:
    """Fit and judge a run again with the readings and exclusions in force."""
    require_reason(reason)
    record = _correctable(store, number)
    evaluation = evaluate_and_check(record.definition, record.readings, record.evaluation.history)
    now = store.now()
    with store.change(action="refit run", by=by, reason=reason) as session:
        _refuse_changed(session, record)
        _supersede(session, record, evaluation, by=by, at=now, reason=reason)
    return show_run(store, number)


def void_run(store: tables.Store, number: int, *, reason: str, by: str) -> RunRecord:
    """Declare that a run counts no longer; it stays visible.

    Raises
    ------
    InputError
        When it is void already, or other runs were quantified on its curve.
    """
    require_reason(reason)
    now = store.now()
    with store.change(action="void run", by=by, reason=reason) as session:
        run_numbered(session, number)
        refuse_void(session, number)
        users = [n for n in dependent_runs(session, number) if void_of(session, n) is None]
        if users:
            raise InputError(
                f"run {number}: its curve was used by run {', '.join(map(str, users))}; declare these void first"
            )
        session.add(tables.RunVoid(run_id=number, reason=reason, by=by, at=now))
    return show_run(store, number)


def _decide(
    store: tables.Store,
    number: int,
    which: Sequence[str],
    decision: str,
    reason: str,
    reason_class: str,
    by: str,
) -> RunRecord:
    require_reason(reason)
    if reason_class not in REASON_CLASSES:
        raise InputError(f"unknown class of reason '{reason_class}'; known are {', '.join(REASON_CLASSES)}")
    record = _correctable(store, number)
    chosen = [r for name in which for r in find_readings(record.readings, name)]
    _refuse_undecidable(chosen, decision)
    if outlying := decision == "exclude" and reason_class == OUTLYING:
        refuse_outlying(record, chosen)
    keys = {r.key for r in chosen}
    out, as_outlying = (reason if decision == "exclude" else None), ("excluded" if outlying else None)
    readings = [
        replace(r, excluded=out, outlying=as_outlying) if r.key in keys else r for r in record.readings
    ]
    evaluation = evaluate_and_check(record.definition, readings, record.evaluation.history)
    back = _all_back(record, keys) if outlying and stays_noisy(evaluation) else None
    now = store.now()
    with store.change(action=f"{decision} readings", by=by, reason=reason) as session:
        _refuse_changed(session, record)
        made = _Decision(decision, reason_class, reason, by, now)
        _decide_on(session, number, keys, made)
        curve_id = _supersede(session, record, evaluation, by=by, at=now, reason=reason)
        if back is not None:
            why = "the run scatters more than its history without it too: not acceptable"
            _decide_on(session, number, keys, replace(made, decision="restore", reason=why))
            _supersede(session, replace(record, curve_id=curve_id), back, by=by, at=now, reason=why)
    return show_run(store, number)


def _all_back(record: RunRecord, keys: set[int]) -> Evaluation:
    """The run with all its readings after it stayed noisy without the outlying one: not acceptable."""
    readings = [replace(r, outlying="restored") if r.key in keys else r for r in record.readings]
    return evaluate_and_check(record.definition, readings, record.evaluation.history)


@dataclass(frozen=True, slots=True)
class _Decision:
    """What is decided about readings, why, by whom and when."""

    decision: str
    reason_class: str
    reason: str
    by: str
    at: datetime


def _decide_on(session: Session, number: int, keys: set[int], made: _Decision) -> None:
    before = exclusions_in_force(session, number)
    for row in current_readings(session, number):
        if row.ordinal in keys:
            earlier = before.get(row.ordinal)
            session.add(
                tables.Exclusion(
                    # A reading that was amended since keeps one line of decisions.
                    reading_id=earlier.reading_id if earlier else row.id,
                    decision=made.decision,
                    reason_class=made.reason_class,
                    reason=made.reason,
                    by=made.by,
                    at=made.at,
                    supersedes=earlier.id if earlier else None,
                )
            )
    session.flush()


def _refuse_undecidable(chosen: Sequence[Measured], decision: str) -> None:
    for reading in chosen:
        if reading.role not in ("standard", "anchor", "blank", "zero"):
            raise InputError(
                f"{reading.where} is no standard but {reading.role}; only what is fitted is excluded"
            )
        if decision == "exclude" and reading.excluded is not None:
            raise InputError(f"{reading.where} is excluded already ({reading.excluded})")
        if decision == "restore" and reading.excluded is None:
            raise InputError(f"{reading.where} is not excluded; nothing to restore")


def _correctable(store: tables.Store, number: int) -> RunRecord:
    record = show_run(store, number)
    if record.heading.void_reason is not None:
        raise InputError(
            f"run {number} is void ({record.heading.void_reason}); nothing more is changed in it"
        )
    if record.heading.kind != "calibration":
        raise InputError(f"run {number} holds unknowns only; its curve belongs to run {record.curve_run}")
    return record


def _refuse_changed(session: Session, record: RunRecord) -> None:
    """Check again, inside the transaction, everything the new evaluation rests on."""
    number = record.heading.id or 0
    refuse_void(session, number)
    in_force = current_curve(session, number)
    now = measured_run(session, run_numbered(session, number), record.definition)
    if in_force is None or in_force.id != record.curve_id or now != record.readings:
        raise InputError(f"run {number} was corrected by someone else meanwhile; look at it and try again")


def _supersede(
    session: Session, record: RunRecord, evaluation: Evaluation, *, by: str, at: datetime, reason: str
) -> int:
    """Write the new curve over the old one, with all quantities that rest on it; its number."""
    number = record.heading.id or 0
    evaluation = with_basis(record.definition, record.readings, evaluation, record.evaluation.basis)
    ids = {r.ordinal: r.id for r in current_readings(session, number)}
    curve_id = add_evaluation(
        session, number, evaluation, ids, by=by, at=at, supersedes=record.curve_id, reason=reason
    )
    add_quantities(session, number, curve_id, evaluation.quantities)
    for dependent in dependent_runs(session, number):
        session.flush()
        requantify(session, dependent)
    return curve_id


def judge_again(session: Session, number: int, by: str, now: datetime, reason: str) -> None:
    """Evaluate a run anew: another instrument has another detector ceiling."""
    record = load_run(session, number, (0, ""))
    evaluation = evaluate_and_check(record.definition, record.readings, record.evaluation.history)
    _supersede(session, record, evaluation, by=by, at=now, reason=reason)


def requantify(session: Session, number: int) -> None:
    """Quantify a run again on the curve in force for it."""
    record = load_run(session, number, (0, ""))
    verdict = record.evaluation.verdict
    others = [r for r in record.readings if r.role in QUANTIFIED_ROLES]
    if not others:
        return
    flag = "curve-rejected" if record.curve_run == number else "curve-superseded"
    found: tuple[QuantityRecord, ...] = quantities_of(
        record.definition,
        record.evaluation.curve,
        verdict.accepted,
        others,
        verdict.lowest,
        verdict.highest,
        flag,
        _curve_run(session, record),
        record.evaluation.basis,
    )
    add_quantities(session, number, record.curve_id or 0, found)


def _curve_run(session: Session, record: RunRecord) -> CurveRun:
    """What the run whose curve is used says about the samples, its own or another."""
    if record.curve_run == record.heading.id:
        return curve_run(record.readings, record.evaluation.verdict.carried_over)
    return curve_run(load_run(session, record.curve_run or 0, (0, "")).readings)


def require_reason(reason: str) -> None:
    """Refuse a correction without a reason in words."""
    if not reason.strip():
        raise InputError("a correction needs a reason in words")


def refuse_void(session: Session, number: int) -> None:
    """Refuse to change a run that counts no longer."""
    void = void_of(session, number)
    if void is not None:
        raise InputError(f"run {number} is void already ({void.reason})")
