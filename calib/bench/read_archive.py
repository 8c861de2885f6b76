"""Read many runs at once: a few queries for hundreds of runs, not a dozen for each."""

from __future__ import annotations

from collections.abc import Callable, Collection, Mapping
from dataclasses import dataclass
from datetime import datetime

from sqlalchemy import select
from sqlalchemy.orm import Session, aliased

from calib import store as tables
from calib.bench.evaluate import fitted_readings
from calib.bench.keeping import curve_of, measured_of, verdict_record
from calib.bench.keeping_quantities import WITHDRAWN
from calib.bench.method_definition import MethodDefinition
from calib.bench.records import Measured, VerdictRecord
from calib.bench.show_run import local
from calib.curves.curve import Curve
from calib.intake import conversion_factor

SampleKey = tuple[str, str, float, float]  # role, sample, dilution, nominal concentration
REPORTED_ROLES = ("unknown", "control")


@dataclass(frozen=True, slots=True)
class ArchivedRun:
    """What identifies a run; ``source`` is the run whose curve it is read on (its own number, or another)."""

    id: int
    kind: str
    method_id: int
    method: str
    instrument: str
    at: datetime
    source: int
    void: bool
    concentration_unit: str
    response_ceiling: float | None


@dataclass(frozen=True, slots=True)
class Reported:
    """A reported concentration with its interval; an end that is open is None."""

    concentration: float
    lower: float | None
    upper: float | None


def archived_runs(session: Session) -> dict[int, ArchivedRun]:
    """Every run of the store, in the order they were measured."""
    used = aliased(tables.Curve)
    rows = session.execute(
        select(
            tables.Run.id,
            tables.Run.kind,
            tables.Run.method_id,
            tables.Run.concentration_unit,
            tables.Method.name,
            tables.Instrument.name,
            tables.Instrument.response_ceiling,
            tables.RunFacts.at,
            tables.RunFacts.offset_minutes,
            used.run_id,
            tables.RunVoid.id,
        )
        .join(tables.RunFacts, tables.RunFacts.run_id == tables.Run.id)
        .join(tables.Instrument, tables.Instrument.id == tables.RunFacts.instrument_id)
        .join(tables.Method, tables.Method.id == tables.Run.method_id)
        .outerjoin(used, used.id == tables.Run.curve_id)
        .outerjoin(tables.RunVoid, tables.RunVoid.run_id == tables.Run.id)
        .where(tables.is_current(tables.RunFacts))
        .order_by(tables.RunFacts.at, tables.Run.id)
    )
    return {
        number: ArchivedRun(
            id=number,
            kind=kind,
            method_id=method_id,
            method=method,
            instrument=instrument,
            at=local(at, offset),
            source=number if source is None else source,
            void=void is not None,
            concentration_unit=unit,
            response_ceiling=ceiling,
        )
        for number, kind, method_id, unit, method, instrument, ceiling, at, offset, source, void in rows
    }


def measured_of_runs(
    session: Session, runs: Collection[ArchivedRun], unit: str
) -> dict[int, tuple[Measured, ...]]:
    """Readings in force of each run, nominal values in ``unit``, with exclusions and saturation."""
    numbers = [run.id for run in runs]
    readings: dict[int, list[tables.Reading]] = {n: [] for n in numbers}
    query = select(tables.Reading).where(
        tables.Reading.run_id.in_(numbers), tables.is_current(tables.Reading)
    )
    for row in session.scalars(query.order_by(tables.Reading.run_id, tables.Reading.ordinal)):
        readings[row.run_id].append(row)
    exclusions: dict[int, dict[int, tables.Exclusion]] = {n: {} for n in numbers}
    decided = (
        select(tables.Reading.run_id, tables.Reading.ordinal, tables.Exclusion)
        .join(tables.Exclusion, tables.Exclusion.reading_id == tables.Reading.id)
        .where(tables.Reading.run_id.in_(numbers), tables.is_current(tables.Exclusion))
    )
    for number, ordinal, exclusion in session.execute(decided):
        exclusions[number][ordinal] = exclusion
    return {
        run.id: measured_of(
            readings[run.id],
            conversion_factor(run.concentration_unit, unit),
            run.response_ceiling,
            exclusions[run.id],
        )
        for run in runs
    }


def curves_in_force(
    session: Session,
    measured: Mapping[int, tuple[Measured, ...]],
    definition_of_run: Callable[[int], MethodDefinition],
) -> dict[int, tuple[Curve, VerdictRecord]]:
    """Stored curve and verdict in force of calibration runs; nothing is fitted again."""
    rows = session.execute(
        select(tables.Curve, tables.VerdictRow)
        .join(tables.VerdictRow, tables.VerdictRow.curve_id == tables.Curve.id)
        .where(tables.Curve.run_id.in_(measured), tables.is_current(tables.Curve))
    )
    found = [(curve, verdict) for curve, verdict in rows]
    by_rule = _left_out_by_rule(session, [curve.id for curve, _ in found])
    return {
        curve.run_id: (
            curve_of(
                curve,
                [
                    m
                    for m in fitted_readings(definition_of_run(curve.run_id), measured[curve.run_id])
                    if m.key not in by_rule.get(curve.id, ())
                ],
            ),
            verdict_record(verdict),
        )
        for curve, verdict in found
    }


def _left_out_by_rule(session: Session, curves: Collection[int]) -> dict[int, set[int]]:
    """Ordinals of the standards each curve excludes, by a person or by the rule of its method."""
    query = (
        select(tables.CurveStandard.curve_id, tables.Reading.ordinal)
        .join(tables.Reading, tables.Reading.id == tables.CurveStandard.reading_id)
        .where(tables.CurveStandard.curve_id.in_(curves), tables.CurveStandard.excluded)
    )
    found: dict[int, set[int]] = {}
    for curve, ordinal in session.execute(query):
        found.setdefault(curve, set()).add(ordinal)
    return found


def reported_in_force(session: Session, numbers: Collection[int]) -> dict[int, dict[SampleKey, Reported]]:
    """Reported concentrations of unknowns and controls of each run; those without one are left out."""
    row = tables.QuantityRow
    query = select(
        row.run_id,
        row.role,
        row.sample,
        row.dilution,
        row.nominal,
        row.concentration,
        row.lower,
        row.upper,
        row.flags,
    ).where(
        row.run_id.in_(numbers),
        row.role.in_(REPORTED_ROLES),
        row.position == "inside",
        row.concentration.is_not(None),
        tables.is_current(row),
    )
    found: dict[int, dict[SampleKey, Reported]] = {n: {} for n in numbers}
    for number, role, sample, dilution, nominal, value, lower, upper, flags in session.execute(query):
        if WITHDRAWN not in flags:
            found[number][(role, sample, dilution, nominal or 0.0)] = Reported(value, lower, upper)
    return found
