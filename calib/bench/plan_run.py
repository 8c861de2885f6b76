"""What logging a file would mean: everything decided and checked, nothing written."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from datetime import datetime, timedelta, timezone
from pathlib import Path

from sqlalchemy import select
from sqlalchemy.orm import Session

from calib import store as tables
from calib.bench.find import instrument_named, method_named, solution_named
from calib.bench.find_basis import BasisRequest, find_basis
from calib.bench.find_readings import with_exclusions
from calib.bench.keeping import definition_of, is_saturated
from calib.bench.lot_rules import Override, usable_lot
from calib.bench.method_definition import MethodDefinition
from calib.bench.noise_history import history_before
from calib.bench.records import Measured, NoiseHistory
from calib.bench.uncertainty_basis import CURVE_ONLY, UncertaintyBasis
from calib.errors import DuplicateFile, InputError, UnknownUnit
from calib.intake import (
    ParsedFile,
    ParsedReading,
    ParsedRun,
    content_fingerprint,
    conversion_factor,
    read_file,
)

LATEST = timedelta(days=1)  # how far an instrument's clock may run ahead of this computer's
SMALLEST, LARGEST = 1e-100, 1e100  # numbers beyond only overflow in a fit


@dataclass(frozen=True, slots=True)
class LogOptions:
    """What a person says beside the file; what the file says itself need not be repeated.

    ``exclusions`` names readings left out for an assignable cause before any fit, each with the cause;
    ``lot_override`` is why a lot that is unknown or expired is used all the same.
    """

    by: str
    instrument: str | None = None
    methods: tuple[str, ...] = ()
    at: datetime | None = None
    lot: str | None = None
    layout: str | None = None
    exclusions: tuple[tuple[str, str], ...] = ()
    lot_override: str | None = None


@dataclass(frozen=True, slots=True)
class PlannedRun:
    """One run of a file with everything resolved.

    ``prepared`` is the solution the standards were made from, ``lot`` the lot at its root.
    ``history`` is what the noise model was pooled over, where the method asks for it; ``notes`` says
    in words what was decided, such as a conversion of units.
    """

    parsed: ParsedRun
    instrument: tables.Instrument
    method: tables.Method
    definition: MethodDefinition
    at: datetime
    offset_minutes: int
    operator: str
    lot: tables.StandardLot | None
    measured: tuple[Measured, ...]
    content_fingerprint: str
    history: NoiseHistory | None = None
    notes: tuple[str, ...] = field(default=())
    overrides: tuple[Override, ...] = ()
    prepared: tables.Preparation | None = None
    basis: UncertaintyBasis = CURVE_ONLY

    @property
    def material(self) -> str | None:
        """Name of the prepared solution or lot the standards were made from."""
        return self.prepared.name if self.prepared else self.lot.name if self.lot else None

    @property
    def has_standards(self) -> bool:
        """Whether a curve can be fitted from this run."""
        return any(m.role == "standard" for m in self.measured)


@dataclass(frozen=True, slots=True)
class LogPlan:
    """A file and its runs, ready to be evaluated."""

    file: ParsedFile
    runs: tuple[PlannedRun, ...]
    by: str


def plan_file(store: tables.Store, path: str | Path, options: LogOptions) -> LogPlan:
    """Read a file and resolve instrument, method, time, lot and units of each run.

    Raises
    ------
    InputError, NotFound
        Naming the file and what has to be said or corrected.
    DuplicateFile
        When the same readings are in the store.
    """
    parsed = read_file(path, layout=options.layout)
    with store.reading() as session:
        runs = tuple(_plan(session, parsed, run, options, store.now()) for run in parsed.runs)
        _refuse_one_method_for_two(parsed, runs)
        refuse_duplicates(session, parsed, runs)
    kept = with_exclusions([run.measured for run in runs], options.exclusions)
    runs = tuple(replace(run, measured=measured) for run, measured in zip(runs, kept, strict=True))
    return LogPlan(parsed, runs, options.by)


def refuse_duplicates(session: Session, file: ParsedFile, runs: Sequence[PlannedRun]) -> None:
    """Refuse a file of which a run's bytes or readings are in the store under its method.

    To be asked before any run of the file is written: the runs of one file share its bytes.

    Raises
    ------
    DuplicateFile
        Naming the run that holds them.
    """
    for run in runs:
        _refuse_duplicate(session, file, run)
        _refuse_same_start(session, file, run)


def _refuse_duplicate(session: Session, file: ParsedFile, run: PlannedRun) -> None:
    same_bytes = tables.Original.fingerprint == file.fingerprint
    same_content = tables.Run.content_fingerprint == run.content_fingerprint
    found = session.execute(
        select(tables.Run.id, tables.Original.name, same_bytes)
        .join(tables.Original, tables.Original.id == tables.Run.original_id)
        .join(tables.Method, tables.Method.id == tables.Run.method_id)
        .outerjoin(tables.RunVoid, tables.RunVoid.run_id == tables.Run.id)
        .where(same_bytes | same_content, tables.Method.name == run.method.name, tables.RunVoid.id.is_(None))
        .limit(1)
    ).first()
    if found is None:
        return
    number, name, identical = found
    what = "the same file is" if identical else "the same readings, in another form, are"
    raise DuplicateFile(
        f"{file.name}: {what} logged already as run {number} ({name}); nothing was written "
        f"(declare run {number} void first if it has to be logged again)"
    )


def _refuse_same_start(session: Session, file: ParsedFile, run: PlannedRun) -> None:
    """An instrument cannot start two runs of one method at once: one is an edited copy."""
    number = session.scalar(
        select(tables.Run.id)
        .join(tables.RunFacts, tables.RunFacts.run_id == tables.Run.id)
        .join(tables.Method, tables.Method.id == tables.Run.method_id)
        .outerjoin(tables.RunVoid, tables.RunVoid.run_id == tables.Run.id)
        .where(
            tables.RunFacts.instrument_id == run.instrument.id,
            tables.RunFacts.at == run.at,
            tables.Method.name == run.method.name,
            tables.Run.kind == ("calibration" if run.has_standards else "unknowns"),
            tables.is_current(tables.RunFacts),
            tables.RunVoid.id.is_(None),
        )
        .limit(1)
    )
    if number is not None:
        raise DuplicateFile(
            f"{file.name}: run {number} of {run.instrument.name} and method {run.method.name} started at the same "
            f"time, {run.at:%Y-%m-%d %H:%M:%S}, with other readings; nothing was written (compare the two; "
            f"declare run {number} void if this file replaces it)"
        )


def _refuse_one_method_for_two(file: ParsedFile, runs: Sequence[PlannedRun]) -> None:
    first: dict[tuple[int, str], PlannedRun] = {}
    for run in runs:
        other = first.setdefault((run.instrument.id, run.method.name), run)
        if other is not run:
            raise InputError(
                f"{file.name}: method {run.method.name} cannot be for both '{other.parsed.analyte}' and "
                f"'{run.parsed.analyte}'; give --method once for each analyte, or name the method in the file"
            )


def _plan(
    session: Session, file: ParsedFile, run: ParsedRun, options: LogOptions, now: datetime
) -> PlannedRun:
    instrument = instrument_named(session, _agreed(file, "instrument", options.instrument, run.instrument))
    if run.serial and instrument.serial and run.serial != instrument.serial:
        raise InputError(
            f"{file.name}: written by serial {run.serial}, but instrument {instrument.name} is registered "
            f"with serial {instrument.serial}; choose the right instrument or correct the register"
        )
    method = method_named(session, _method_name(session, file, run, options.methods))
    definition = definition_of(method)
    at = _moment(file, run, instrument, options.at)
    _refuse_future(file, at, now)
    lot_name = _agreed(file, "lot", options.lot, run.lot) if options.lot or run.lot else None
    named, overrides = _lot(session, run, lot_name, at, options.lot_override)
    prepared = named if isinstance(named, tables.Preparation) else None
    lot = session.get_one(tables.StandardLot, prepared.lot_id) if prepared else named
    assert not isinstance(lot, tables.Preparation)
    factor = _unit_factor(file, run, definition)
    _require_response_unit(file, run, definition)
    for reading in run.readings:
        _require_measurable(file, reading)
    measured = tuple(_measured(i, r, factor, instrument) for i, r in enumerate(run.readings, start=1))
    standards = any(m.role == "standard" for m in measured)
    return PlannedRun(
        parsed=run,
        instrument=instrument,
        method=method,
        definition=definition,
        at=at,
        offset_minutes=_offset_minutes(at),
        operator=run.operator or options.by,
        lot=lot,
        measured=measured,
        content_fingerprint=content_fingerprint(_resolved(run, instrument.name, definition.analyte, at)),
        history=history_before(session, instrument.name, definition, at) if standards else None,
        notes=(*_notes(run, definition, factor), *_lot_notes(named, at)),
        prepared=prepared,
        overrides=overrides,
        basis=find_basis(
            session, BasisRequest(definition, instrument.id, at, lot, prepared, _levels_of(measured))
        ),
    )


def _levels_of(measured: Sequence[Measured]) -> tuple[float, ...]:
    roles = ("standard", "anchor")
    return tuple(m.concentration for m in measured if m.role in roles and m.concentration is not None)


def _lot(
    session: Session, run: ParsedRun, name: str | None, at: datetime, override: str | None
) -> tuple[tables.StandardLot | tables.Preparation | None, tuple[Override, ...]]:
    """The lot of the standards; unknowns alone use none, so its date does not matter for them."""
    if any(reading.role == "standard" for reading in run.readings):
        return usable_lot(session, name, at, override)
    return (solution_named(session, name) if name else None), ()


def _resolved(run: ParsedRun, instrument: str, analyte: str, at: datetime) -> ParsedRun:
    """The run with what its file may leave open, so that another form of it has the same fingerprint."""
    return replace(run, instrument=instrument, analyte=analyte, at=at)


def _agreed(file: ParsedFile, what: str, said: str | None, written: str | None) -> str:
    if said and written and said != written:
        raise InputError(
            f"{file.name}: the file says {what} {written}, but --{what} says {said}; one is wrong"
        )
    chosen = said or written
    if not chosen:
        raise InputError(f"{file.name}: the file does not say which {what}; give --{what}")
    return chosen


def _method_name(session: Session, file: ParsedFile, run: ParsedRun, methods: tuple[str, ...]) -> str:
    if len(methods) <= 1:
        return _agreed(file, "method", methods[0] if methods else None, run.method)
    if run.method in methods:
        return run.method
    analyte = (run.analyte or "").casefold()
    fitting = [m for m in methods if analyte and analyte in _analyte_of(session, m)]
    if len(fitting) != 1:
        raise InputError(
            f"{file.name}: which of the methods {', '.join(methods)} belongs to "
            f"'{run.analyte or 'a run without an analyte'}' is not clear; name the method in the file"
        )
    return fitting[0]


def _analyte_of(session: Session, method: str) -> str:
    return definition_of(method_named(session, method)).analyte.casefold()


def _moment(
    file: ParsedFile, run: ParsedRun, instrument: tables.Instrument, said: datetime | None
) -> datetime:
    written = run.at or _first_reading_time(run.readings)
    zone = timezone(timedelta(minutes=instrument.utc_offset_minutes))
    moments = [t if t.tzinfo else t.replace(tzinfo=zone) for t in (said, written) if t is not None]
    if not moments:
        raise InputError(f"{file.name}: the file gives no time of measurement; give --at 2026-03-02T08:20")
    if len(moments) == 2 and moments[0] != moments[1]:
        raise InputError(
            f"{file.name}: the file says it was measured {moments[1]:%Y-%m-%d %H:%M %z}, but --at says "
            f"{moments[0]:%Y-%m-%d %H:%M %z}; log it as written and correct it with calib run amend"
        )
    return moments[-1]


def _refuse_future(file: ParsedFile, at: datetime, now: datetime) -> None:
    if at > now + LATEST:
        raise InputError(
            f"{file.name}: measured {at:%Y-%m-%d %H:%M %z}, which lies in the future of this computer's clock "
            f"({now:%Y-%m-%d %H:%M %z}); correct the time or the clock"
        )


def _lot_notes(lot: tables.StandardLot | tables.Preparation | None, at: datetime) -> tuple[str, ...]:
    if lot is None:
        return ()
    prepared = isinstance(lot, tables.Preparation)
    what = f"{'prepared solution' if prepared else 'standard lot'} {lot.name}"
    notes = []
    if lot.expiry is not None and at.date() > lot.expiry:
        notes.append(f"{what} expired on {lot.expiry.isoformat()}, before this run")
    if isinstance(lot, tables.Preparation) and at.date() < lot.prepared_on:
        notes.append(f"{what} was prepared on {lot.prepared_on.isoformat()}, after this run")
    return tuple(notes)


def _first_reading_time(readings: Sequence[ParsedReading]) -> datetime | None:
    times = [r.at for r in readings if r.at is not None]
    return min(times) if times else None


def _offset_minutes(at: datetime) -> int:
    offset = at.utcoffset()
    return int(offset.total_seconds() // 60) if offset else 0


def _unit_factor(file: ParsedFile, run: ParsedRun, definition: MethodDefinition) -> float:
    try:
        return conversion_factor(run.concentration_unit, definition.concentration_unit)
    except UnknownUnit as cause:
        raise UnknownUnit(f"{file.name}, method {definition.name}: {cause}") from cause


def _require_response_unit(file: ParsedFile, run: ParsedRun, definition: MethodDefinition) -> None:
    if run.response_unit != definition.response_unit:
        raise InputError(
            f"{file.name}: responses are in '{run.response_unit}', but method {definition.name} expects "
            f"'{definition.response_unit}'; choose the right method or correct the unit in the file"
        )


def _require_measurable(file: ParsedFile, reading: ParsedReading) -> None:
    for value in (reading.concentration, reading.response, reading.dilution):
        if value and not SMALLEST <= abs(value) <= LARGEST:
            raise InputError(
                f"{file.name}: {reading.place}: {value:g} is no measured number: it lies beyond "
                f"{SMALLEST:g} to {LARGEST:g}; correct it"
            )


def _measured(ordinal: int, reading: ParsedReading, factor: float, instrument: tables.Instrument) -> Measured:
    return Measured(
        key=ordinal,
        sample=reading.sample,
        role=str(reading.role),
        concentration=None if reading.concentration is None else reading.concentration * factor,
        response=reading.response,
        absent_cause=reading.absent_cause,
        dilution=reading.dilution,
        position=reading.position,
        excluded=None,
        saturated=is_saturated(reading.response, reading.absent_cause, instrument.response_ceiling),
        place=str(reading.place),
        internal_standard=reading.internal_standard,
    )


def _notes(run: ParsedRun, definition: MethodDefinition, factor: float) -> tuple[str, ...]:
    if factor == 1.0:
        return ()
    return (
        f"concentrations converted from {run.concentration_unit} to {definition.concentration_unit}: "
        f"× {factor:g}",
    )
