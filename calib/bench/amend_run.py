"""Amendments of a run: facts and readings that were wrong get a new version, with the reason."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from datetime import datetime, timedelta, timezone

from sqlalchemy.orm import Session

from calib import store as tables
from calib.bench.correct_run import judge_again, refuse_void, requantify, require_reason
from calib.bench.find import facts_of, instrument_named, preparation_of, solution_named
from calib.bench.find_basis import find_basis, keep_basis, request_for
from calib.bench.find_readings import find_readings
from calib.bench.keeping import current_readings
from calib.bench.quantify import dependent_runs
from calib.bench.records import Measured, RunRecord
from calib.bench.show_run import load_run, show_run
from calib.errors import InputError


@dataclass(frozen=True, slots=True)
class Change:
    """Facts of a run to be corrected; None leaves a fact as it is.

    ``samples`` and ``dilutions`` map a reading (see `find_readings`) to its new value.
    """

    instrument: str | None = None
    lot: str | None = None
    operator: str | None = None
    at: datetime | None = None
    samples: tuple[tuple[str, str], ...] = ()
    dilutions: tuple[tuple[str, float], ...] = ()

    @property
    def of_facts(self) -> bool:
        """Whether a fact of the whole run changes."""
        return any(v is not None for v in (self.instrument, self.lot, self.operator, self.at))


def amend_run(store: tables.Store, number: int, change: Change, *, reason: str, by: str) -> RunRecord:
    """Correct facts of a run or of its readings; the original stays beside the amendment.

    Raises
    ------
    InputError
        When nothing changes, a reading is not found, or no reason is given.
    """
    require_reason(reason)
    if not (change.of_facts or change.samples or change.dilutions):
        raise InputError("nothing to amend: name at least one fact and its new value")
    now = store.now()
    with store.change(action="amend run", by=by, reason=reason) as session:
        record = load_run(session, number, (0, ""))
        refuse_void(session, number)
        _amend_facts(session, number, change, reason, by, now)
        _amend_readings(session, record.readings, number, change)
        session.flush()
        if change.lot:
            _find_bases_again(session, record, by, now)
        if change.instrument and record.heading.kind == "calibration":
            judge_again(session, number, by, now, reason)
        elif change.instrument or change.samples or change.dilutions or change.lot:
            requantify(session, number)
    return show_run(store, number)


def _find_bases_again(session: Session, record: RunRecord, by: str, now: datetime) -> None:
    """Another lot has another certificate: for the run, and for those read on its curve."""
    number = record.heading.id or 0
    levels = [s.concentration for s in record.evaluation.standards]
    for each in (number, *dependent_runs(session, number)):
        source = facts_of(session, record.curve_run or number)
        request = request_for(session, record.definition, source, levels, facts_of(session, each).at)
        keep_basis(session, each, find_basis(session, request), by=by, at=now)
        session.flush()
        if each != number:
            requantify(session, each)


def _amend_facts(session: Session, number: int, change: Change, reason: str, by: str, now: datetime) -> None:
    """New facts with the reason, also where only readings change: they have no reason of their own."""
    old = facts_of(session, number)
    instrument = instrument_named(session, change.instrument) if change.instrument else None
    at, offset = _amended_time(old, change.at)
    lot_id, prepared = _amended_material(session, old, change.lot)
    facts = tables.RunFacts(
        run_id=number,
        instrument_id=instrument.id if instrument else old.instrument_id,
        lot_id=lot_id,
        at=at,
        offset_minutes=offset,
        operator=change.operator or old.operator,
        supersedes=old.id,
        reason=reason,
        by=by,
        recorded_at=now,
    )
    session.add(facts)
    if prepared is not None:
        session.flush()
        session.add(tables.RunSolution(facts_id=facts.id, preparation_id=prepared.id))


def _amended_material(
    session: Session, old: tables.RunFacts, name: str | None
) -> tuple[int | None, tables.Preparation | None]:
    """Number of the lot, and the prepared solution where one was used."""
    if name is None:
        return old.lot_id, preparation_of(session, old)
    named = solution_named(session, name)
    if isinstance(named, tables.Preparation):
        return named.lot_id, named
    return named.id, None


def _amended_time(old: tables.RunFacts, at: datetime | None) -> tuple[datetime, int]:
    if at is None:
        return old.at, old.offset_minutes
    moment = at if at.tzinfo else at.replace(tzinfo=timezone(timedelta(minutes=old.offset_minutes)))
    offset = moment.utcoffset() or timedelta()
    return moment, int(offset.total_seconds() // 60)


def _amend_readings(session: Session, readings: Sequence[Measured], number: int, change: Change) -> None:
    fields: dict[int, dict[str, str | float]] = {}
    for name, sample in change.samples:
        if not sample.strip():
            raise InputError(f"the new name of sample '{name}' is empty")
        for reading in find_readings(readings, name):
            fields.setdefault(reading.key, {})["sample"] = sample
    for name, dilution in change.dilutions:
        if not (math.isfinite(dilution) and dilution > 0):
            raise InputError(f"dilution {dilution:g} of '{name}' must be above 0")
        for reading in find_readings(readings, name):
            fields.setdefault(reading.key, {})["dilution"] = dilution
    for row in current_readings(session, number):
        if row.ordinal in fields:
            session.add(_copy(row, fields[row.ordinal]))


def _copy(row: tables.Reading, fields: dict[str, str | float]) -> tables.Reading:
    kept = {
        c.key: getattr(row, c.key)
        for c in tables.Reading.__table__.columns
        if c.key not in ("id", "supersedes")
    }
    return tables.Reading(**(kept | fields), supersedes=row.id)
