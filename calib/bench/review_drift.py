"""Drift of one instrument and method over time, in concentration terms."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import datetime

import numpy as np
from numpy.typing import NDArray
from sqlalchemy import select
from sqlalchemy.orm import Session

from calib import store as tables
from calib.bench.find import instrument_named, method_named
from calib.bench.keeping import curve_of, definition_of
from calib.bench.method_definition import MethodDefinition
from calib.bench.register import EventRecord
from calib.bench.show_run import local
from calib.curves.curve import Curve
from calib.drift.charts import FINAL_RUNS
from calib.drift.references import (
    Axis,
    OffBaseline,
    equivalent_concentrations,
    ln_recovery,
    tabulate_baseline,
)
from calib.drift.review import DriftReview, Track, review_drift
from calib.errors import InputError, NotFound

GRID = 400
# The baseline is tabulated this far beyond the references, so that a drifted response still meets it.
BEYOND = 4.0
NAMES = ("low", "middle", "high")


@dataclass(frozen=True, slots=True)
class DriftRun:
    """One run of the review."""

    id: int
    at: datetime
    decision: str
    lot: str | None
    signals: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class DriftRecord:
    """The drift review of one instrument and method.

    Attributes
    ----------
    references : tuple of float
        Concentrations of the fixed samples, low to high.
    responses : (runs, 3) array
        Response of each run's curve at the references.
    shift_percent : (runs, 3) array
        What a fixed sample would have read on the baseline curve, as a change in percent.
    recovery_percent : (runs,) array
        Mean recovery of the check standards of each run, percent; nan without any.
    review : DriftReview
        Charts of the response at the references and of ln recovery, with limits and signals.
    restart : int
        First run of the present segment.
    """

    instrument: str
    method: str
    concentration_unit: str
    response_unit: str
    references: tuple[float, ...]
    runs: tuple[DriftRun, ...]
    events: tuple[EventRecord, ...]
    responses: NDArray[np.float64]
    shift_percent: NDArray[np.float64]
    recovery_percent: NDArray[np.float64]
    review: DriftReview
    restart: int
    baseline_runs: int


@dataclass(frozen=True, slots=True)
class _Row:
    """One run as it is read for the review."""

    id: int
    at: datetime
    decision: str
    lot: str | None
    curve: Curve | None
    recoveries: tuple[float, ...]
    lowest: float | None
    highest: float | None


def review_instrument(
    store: tables.Store, instrument: str, method: str | None = None, *, since: datetime | None = None
) -> DriftRecord:
    """Review the runs of one instrument and method.

    Parameters
    ----------
    instrument : str
    method : str, optional
        May be left out where the instrument runs one method only.
    since : datetime, optional
        Declared restart: limits rest on accepted runs from here on.

    Raises
    ------
    NotFound, InputError
        When there is nothing to review, or several methods to choose from.
    """
    with store.reading() as session:
        method = method or _only_method(session, instrument)
        definition = definition_of(method_named(session, method))
        rows = _rows(session, instrument, method)
        events = _events(session, instrument)
    if not rows:
        raise NotFound(f"no run of instrument {instrument} with method {method} is logged; nothing to review")
    restart = next((i for i, r in enumerate(rows) if since is None or _begins_by(since, r.at)), len(rows))
    return _review(instrument, definition, rows, events, restart)


def _begins_by(since: datetime, at: datetime) -> bool:
    """Whether a run is not before a moment; one without an offset is on the clock of the run."""
    return at >= (since if since.tzinfo else since.replace(tzinfo=at.tzinfo))


def reviewed_pairs(store: tables.Store) -> tuple[tuple[str, str], ...]:
    """Instruments and methods that have calibration runs which are not void."""
    query = (
        select(tables.Instrument.name, tables.Method.name)
        .join(tables.RunFacts, tables.RunFacts.instrument_id == tables.Instrument.id)
        .join(tables.Run, tables.Run.id == tables.RunFacts.run_id)
        .join(tables.Method, tables.Method.id == tables.Run.method_id)
        .outerjoin(tables.RunVoid, tables.RunVoid.run_id == tables.Run.id)
        .where(
            tables.Run.kind == "calibration",
            tables.RunVoid.id.is_(None),
            tables.is_current(tables.RunFacts),
        )
        .distinct()
        .order_by(tables.Instrument.name, tables.Method.name)
    )
    with store.reading() as session:
        return tuple((i, m) for i, m in session.execute(query))


def _only_method(session: Session, instrument: str) -> str:
    row = instrument_named(session, instrument)
    names = session.scalars(
        select(tables.Method.name)
        .join(tables.Run, tables.Run.method_id == tables.Method.id)
        .join(tables.RunFacts, tables.RunFacts.run_id == tables.Run.id)
        .where(tables.RunFacts.instrument_id == row.id, tables.is_current(tables.RunFacts))
        .distinct()
        .order_by(tables.Method.name)
    ).all()
    if not names:
        raise NotFound(f"no run of instrument {instrument} is logged; nothing to review")
    if len(names) > 1:
        raise InputError(f"instrument {instrument} runs several methods; give --method: {', '.join(names)}")
    return names[0]


def _rows(session: Session, instrument: str, method: str) -> list[_Row]:
    """Runs in the order of time; void ones are left out."""
    found = session.execute(
        select(tables.Run, tables.RunFacts, tables.Curve, tables.VerdictRow.decision, tables.StandardLot.name)
        .join(tables.RunFacts, tables.RunFacts.run_id == tables.Run.id)
        .join(tables.Method, tables.Method.id == tables.Run.method_id)
        .join(tables.Curve, tables.Curve.run_id == tables.Run.id)
        .join(tables.VerdictRow, tables.VerdictRow.curve_id == tables.Curve.id)
        .outerjoin(tables.StandardLot, tables.StandardLot.id == tables.RunFacts.lot_id)
        .outerjoin(tables.RunVoid, tables.RunVoid.run_id == tables.Run.id)
        .where(
            tables.RunFacts.instrument_id == instrument_named(session, instrument).id,
            tables.Method.name == method,
            tables.RunVoid.id.is_(None),
            tables.is_current(tables.RunFacts),
            tables.is_current(tables.Curve),
        )
        .order_by(tables.RunFacts.at, tables.Run.id)
    ).all()
    recoveries = _recoveries(session, [run.id for run, *_ in found])
    return [
        _Row(
            id=run.id,
            at=local(facts.at, facts.offset_minutes),
            decision=decision,
            lot=lot,
            curve=curve_of(curve, ()) if curve.converged else None,
            recoveries=recoveries.get(run.id, ()),
            lowest=curve.lowest,
            highest=curve.highest,
        )
        for run, facts, curve, decision, lot in found
    ]


def _recoveries(session: Session, runs: Sequence[int]) -> dict[int, tuple[float, ...]]:
    """Ln recovery of the check standards in force of each run."""
    query = select(tables.QuantityRow).where(
        tables.QuantityRow.run_id.in_(runs),
        tables.QuantityRow.role == "check",
        tables.is_current(tables.QuantityRow),
    )
    found: dict[int, tuple[float, ...]] = {}
    for row in session.scalars(query):
        if row.concentration is not None and row.nominal and row.concentration > 0:
            value = float(ln_recovery(row.concentration, row.nominal))
            found[row.run_id] = (*found.get(row.run_id, ()), value)
    return found


def _events(session: Session, instrument: str) -> tuple[EventRecord, ...]:
    row = instrument_named(session, instrument)
    events = session.scalars(
        select(tables.Event).where(tables.Event.instrument_id == row.id).order_by(tables.Event.at)
    )
    return tuple(EventRecord(instrument, local(e.at, e.offset_minutes), e.kind, e.what, e.by) for e in events)


def _review(
    instrument: str,
    definition: MethodDefinition,
    rows: Sequence[_Row],
    events: tuple[EventRecord, ...],
    restart: int,
) -> DriftRecord:
    references = definition.reference_concentrations or _references(rows)
    responses = np.array([_at(r.curve, references) for r in rows])
    recovery = np.array([np.mean(r.recoveries) if r.recoveries else np.nan for r in rows])
    accepted = [r.decision != "rejected" for r in rows]
    usable = [i for i in range(restart, len(rows)) if accepted[i] and rows[i].curve is not None][:FINAL_RUNS]
    shift, reasons = _shift(rows, usable, references, responses)
    tracks = [
        *(Track("response", n, responses[:, j], reasons[j]) for j, n in enumerate(NAMES)),
        Track("check standards", "recovery", recovery),
    ]
    review = review_drift(tracks, accepted, restart)
    runs = tuple(DriftRun(r.id, r.at, r.decision, r.lot, review.signals_of(i)) for i, r in enumerate(rows))
    return DriftRecord(
        instrument=instrument,
        method=definition.name,
        concentration_unit=definition.concentration_unit,
        response_unit=definition.response_unit,
        references=references,
        runs=runs,
        events=events,
        responses=responses,
        shift_percent=shift,
        recovery_percent=100.0 * np.exp(recovery),
        review=review,
        restart=restart,
        baseline_runs=len(usable),
    )


def _references(rows: Sequence[_Row]) -> tuple[float, ...]:
    """Concentrations at a fifth, half and four fifths of the calibrated range in ln x."""
    ranges = [(r.lowest, r.highest) for r in rows if r.lowest and r.highest]
    if not ranges:
        raise InputError("no run has a calibrated range; give reference_concentrations in the method")
    low = np.log(max(low for low, _ in ranges if low))
    high = np.log(min(high for _, high in ranges if high))
    return tuple(float(np.exp(low + share * (high - low))) for share in (0.2, 0.5, 0.8))


def _at(curve: Curve | None, concentrations: Sequence[float]) -> NDArray[np.float64]:
    return np.full(len(concentrations), np.nan) if curve is None else curve.predict(concentrations)


def _shift(
    rows: Sequence[_Row],
    usable: Sequence[int],
    references: Sequence[float],
    responses: NDArray[np.float64],
) -> tuple[NDArray[np.float64], list[list[str]]]:
    """Change a fixed sample would have seen, percent (runs, 3), and why a value is missing."""
    nothing = [OffBaseline.NO_RESPONSE.value] * len(rows)
    if not usable:
        return np.full(responses.shape, np.nan), [nothing] * len(references)
    grid = np.geomspace(references[0] / BEYOND, references[-1] * BEYOND, GRID)
    baseline = tabulate_baseline(grid, np.array([_at(rows[i].curve, grid.tolist()) for i in usable]), Axis.LN)
    found = equivalent_concentrations(references, responses, baseline)
    return found.shift_percent, [[str(w) for w in found.reason[:, j]] for j in range(len(references))]
