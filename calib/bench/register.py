"""Register instruments, their events, methods and standard lots, and list them."""

from __future__ import annotations

import hashlib
import math
from collections.abc import Sequence
from dataclasses import dataclass
from datetime import date, datetime, timedelta, timezone
from pathlib import Path

from sqlalchemy import func, select

from calib import store as tables
from calib.bench.acceptance_settings import limits_without_unit, preset_of
from calib.bench.find import instrument_named, method_named, refuse_taken_name
from calib.bench.keeping import definition_of
from calib.bench.method_definition import MethodDefinition, read_definition
from calib.bench.names import plain_name
from calib.bench.setting_lines import line_of
from calib.bench.show_run import local
from calib.errors import InputError, MethodError, UnknownUnit, UnreadableFile
from calib.intake import parse_concentration_unit
from calib.store.instruments import EVENT_KINDS

LONGEST_METHOD = 1_000_000  # bytes; a method definition is a page


@dataclass(frozen=True, slots=True)
class InstrumentRecord:
    """An instrument as registered."""

    name: str
    kind: str
    serial: str
    location: str
    response_ceiling: float | None
    utc_offset_minutes: int
    added_by: str
    runs: int


@dataclass(frozen=True, slots=True)
class EventRecord:
    """Something that happened to an instrument."""

    instrument: str
    at: datetime
    kind: str
    what: str
    by: str


@dataclass(frozen=True, slots=True)
class MethodRecord:
    """One version of a method."""

    name: str
    version: int
    added_at: datetime
    added_by: str
    fingerprint: str
    text: str
    definition: MethodDefinition


@dataclass(frozen=True, slots=True)
class LotRecord:
    """A standard lot with its certified value."""

    name: str
    material: str
    certified_value: float | None
    unit: str | None
    expanded_uncertainty: float | None
    coverage_factor: float | None
    expiry: date | None
    supplier: str | None
    certificate: str | None
    traceability: str | None
    degrees_of_freedom: float | None = None


def add_instrument(
    store: tables.Store,
    name: str,
    *,
    kind: str,
    serial: str,
    location: str,
    response_ceiling: float | None,
    utc_offset_minutes: int,
    by: str,
) -> None:
    """Register an instrument.

    Raises
    ------
    InputError
        When the name is taken or empty.
    """
    name = plain_name(name, "the name of the instrument")
    kind = plain_name(kind, "the kind of the instrument")
    if response_ceiling is not None and not (math.isfinite(response_ceiling) and response_ceiling > 0):
        raise InputError(f"a response ceiling of {response_ceiling:g} is not possible; give a number above 0")
    if abs(utc_offset_minutes) > 14 * 60:
        raise InputError(f"a clock offset of {utc_offset_minutes} minutes from UTC is not possible")
    with store.change(action="add instrument", by=by) as session:
        known = session.scalar(
            select(tables.Instrument.name).where(func.lower(tables.Instrument.name) == name.lower())
        )
        if known is not None:
            raise InputError(f"instrument '{known}' is registered already; choose another name")
        session.add(
            tables.Instrument(
                name=name,
                kind=kind,
                serial=serial,
                location=location,
                response_ceiling=response_ceiling,
                utc_offset_minutes=utc_offset_minutes,
                added_at=store.now(),
                added_by=by,
            )
        )


def list_instruments(store: tables.Store) -> tuple[InstrumentRecord, ...]:
    """All instruments with the number of runs logged on each."""
    with store.reading() as session:
        query = (
            select(tables.RunFacts.instrument_id, func.count())
            .where(tables.is_current(tables.RunFacts))
            .group_by(tables.RunFacts.instrument_id)
        )
        counts = {row[0]: row[1] for row in session.execute(query)}
        rows = session.scalars(select(tables.Instrument).order_by(tables.Instrument.name)).all()
    return tuple(
        InstrumentRecord(
            r.name,
            r.kind,
            r.serial,
            r.location,
            r.response_ceiling,
            r.utc_offset_minutes,
            r.added_by,
            counts.get(r.id, 0),
        )
        for r in rows
    )


def show_instrument(store: tables.Store, name: str) -> InstrumentRecord:
    """One instrument.

    Raises
    ------
    NotFound
        Naming the instruments there are.
    """
    with store.reading() as session:
        instrument_named(session, name)
    return next(i for i in list_instruments(store) if i.name == name)


def add_event(store: tables.Store, instrument: str, *, at: datetime, kind: str, what: str, by: str) -> None:
    """Record what happened to an instrument; a time without an offset is the instrument's own.

    Raises
    ------
    InputError
        For an unknown kind or an empty text.
    """
    if kind not in EVENT_KINDS:
        raise InputError(f"unknown kind of event '{kind}'; known are {', '.join(EVENT_KINDS)}")
    what = " ".join(what.split())
    if not what:
        raise InputError("say in words what happened")
    with store.change(action="add event", by=by) as session:
        row = instrument_named(session, instrument)
        zone = timezone(timedelta(minutes=row.utc_offset_minutes))
        moment = at if at.tzinfo else at.replace(tzinfo=zone)
        offset = moment.utcoffset() or timedelta()
        session.add(
            tables.Event(
                instrument_id=row.id,
                at=moment,
                offset_minutes=int(offset.total_seconds() // 60),
                kind=kind,
                what=what,
                by=by,
                recorded_at=store.now(),
            )
        )


def list_events(store: tables.Store, instrument: str | None = None) -> tuple[EventRecord, ...]:
    """Events in the order of time."""
    query = (
        select(tables.Event, tables.Instrument.name)
        .join(tables.Instrument, tables.Instrument.id == tables.Event.instrument_id)
        .order_by(tables.Event.at)
    )
    with store.reading() as session:
        if instrument is not None:
            query = query.where(tables.Event.instrument_id == instrument_named(session, instrument).id)
        rows = session.execute(query).all()
    return tuple(EventRecord(name, local(e.at, e.offset_minutes), e.kind, e.what, e.by) for e, name in rows)


def add_method(store: tables.Store, path: str | Path, *, by: str) -> MethodRecord:
    """Add a method, or the next version of one, from its TOML file.

    Raises
    ------
    UnreadableFile, MethodError
        When the file cannot be read or contradicts itself; or holds what is stored already.
    """
    text = read_method_text(Path(path))
    name = _new_definition(path, text).name
    fingerprint = hashlib.sha256(text.encode()).hexdigest()
    with store.change(action="add method", by=by) as session:
        latest = session.scalar(
            select(tables.Method)
            .where(tables.Method.name == name)
            .order_by(tables.Method.version.desc())
            .limit(1)
        )
        if latest is not None and latest.fingerprint == fingerprint:
            raise MethodError(
                f"{path}: method {name} version {latest.version} has this very text; nothing to add"
            )
        row = tables.Method(
            name=name,
            version=latest.version + 1 if latest else 1,
            definition=text,
            fingerprint=fingerprint,
            preset=preset_of(text),
            added_at=store.now(),
            added_by=by,
        )
        session.add(row)
    return _method_record(row)


def _new_definition(path: str | Path, text: str) -> MethodDefinition:
    """The definition of a text that is to be added; what it leaves open is refused too."""
    try:
        definition = read_definition(text)
    except (MethodError, UnknownUnit) as wrong:
        raise type(wrong)(f"{path}: {wrong}") from wrong
    for key in limits_without_unit(text):
        unit, place = definition.concentration_unit, f"acceptance.{key}"
        raise MethodError(
            f"{path}: line {line_of(text, place)}: {place} is a concentration and has no unit; "
            f'write {key} = "{definition.limits[key].value:g} {unit}"',
            place,
        )
    return definition


def read_method_text(path: Path) -> str:
    """Text of the TOML file of a method.

    Raises
    ------
    UnreadableFile
        When it cannot be read, is no text, or far too large.
    """
    try:
        if path.stat().st_size > LONGEST_METHOD:
            raise UnreadableFile(f"{path}: too large for a method definition; give the TOML file of a method")
        return path.read_text(encoding="utf-8-sig")
    except UnicodeDecodeError as cause:
        raise UnreadableFile(f"{path}: not UTF-8 text; give the TOML file of a method") from cause
    except OSError as cause:
        raise UnreadableFile(f"{path}: cannot be read ({cause.strerror}); check the path") from cause


def list_methods(store: tables.Store) -> tuple[MethodRecord, ...]:
    """Every version of every method."""
    with store.reading() as session:
        rows = session.scalars(
            select(tables.Method).order_by(tables.Method.name, tables.Method.version)
        ).all()
    return tuple(_method_record(r) for r in rows)


def show_method(store: tables.Store, name: str, version: int | None = None) -> MethodRecord:
    """One version of a method, the latest unless another is asked for."""
    with store.reading() as session:
        return _method_record(method_named(session, name, version))


def _method_record(row: tables.Method) -> MethodRecord:
    return MethodRecord(
        row.name,
        row.version,
        row.added_at,
        row.added_by,
        row.fingerprint,
        row.definition,
        definition_of(row),
    )


def add_lot(store: tables.Store, lot: LotRecord, *, by: str) -> None:
    """Register a standard lot.

    Raises
    ------
    InputError
        When the name is taken, or a certified value lacks its unit, U or k.
    """
    _check_lot(lot)
    with store.change(action="add standard lot", by=by) as session:
        refuse_taken_name(session, lot.name)
        session.add(
            tables.StandardLot(
                name=lot.name,
                material=lot.material,
                certified_value=lot.certified_value,
                unit=parse_concentration_unit(lot.unit) if lot.unit else None,
                expanded_uncertainty=lot.expanded_uncertainty,
                coverage_factor=lot.coverage_factor,
                expiry=lot.expiry,
                supplier=lot.supplier,
                certificate=lot.certificate,
                traceability=lot.traceability,
                degrees_of_freedom=lot.degrees_of_freedom,
                added_at=store.now(),
                added_by=by,
            )
        )


def _check_lot(lot: LotRecord) -> None:
    plain_name(lot.name, "the name of the lot")
    plain_name(lot.material, "the material of the lot")
    if lot.certified_value is not None and lot.unit is None:
        raise InputError(f"lot '{lot.name}': a certified value needs its unit")
    if lot.expanded_uncertainty is not None and lot.coverage_factor is None:
        raise InputError(f"lot '{lot.name}': an expanded uncertainty needs its coverage factor k")
    if lot.degrees_of_freedom is not None and lot.expanded_uncertainty is None:
        raise InputError(f"lot '{lot.name}': degrees of freedom belong to an expanded uncertainty; give both")
    numbers: Sequence[float | None] = (
        lot.certified_value,
        lot.expanded_uncertainty,
        lot.coverage_factor,
        lot.degrees_of_freedom,
    )
    if any(v is not None and not v > 0 for v in numbers):
        raise InputError(f"lot '{lot.name}': certified value, U, k and degrees of freedom must be above 0")


def list_lots(store: tables.Store) -> tuple[LotRecord, ...]:
    """All standard lots."""
    with store.reading() as session:
        rows = session.scalars(select(tables.StandardLot).order_by(tables.StandardLot.name)).all()
    return tuple(
        LotRecord(
            r.name,
            r.material,
            r.certified_value,
            r.unit,
            r.expanded_uncertainty,
            r.coverage_factor,
            r.expiry,
            r.supplier,
            r.certificate,
            r.traceability,
            r.degrees_of_freedom,
        )
        for r in rows
    )
