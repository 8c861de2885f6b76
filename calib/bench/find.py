"""Look records up by the names people use, or say that they are not there."""

from __future__ import annotations

from collections.abc import Sequence

from sqlalchemy import func, select
from sqlalchemy.orm import Session

from calib import store as tables
from calib.errors import InputError, NotFound

LARGEST_KEY = 2**63 - 1  # what a database holds


def instrument_named(session: Session, name: str) -> tables.Instrument:
    """Instrument of that name.

    Raises
    ------
    NotFound
        Naming the instruments there are.
    """
    row = session.scalar(select(tables.Instrument).where(tables.Instrument.name == name))
    if row is None:
        known = session.scalars(select(tables.Instrument.name).order_by(tables.Instrument.name)).all()
        raise NotFound(f"unknown instrument '{name}'; {_known(known, 'calib instrument add')}")
    return row


def require_registered(session: Session, instrument: str | None, method: str | None) -> None:
    """Refuse names that a listing is asked for and nobody registered.

    Raises
    ------
    NotFound
        When there is no such instrument or method.
    """
    if instrument is not None:
        instrument_named(session, instrument)
    if method is not None:
        method_named(session, method)


def method_named(session: Session, name: str, version: int | None = None) -> tables.Method:
    """Latest version of a method, or the one asked for.

    Raises
    ------
    NotFound
        Naming the methods there are.
    """
    query = select(tables.Method).where(tables.Method.name == name)
    if version is not None:
        query = query.where(tables.Method.version == min(version, LARGEST_KEY))
    row = session.scalar(query.order_by(tables.Method.version.desc()).limit(1))
    if row is None:
        known = session.scalars(select(tables.Method.name).distinct().order_by(tables.Method.name)).all()
        which = f"'{name}'" if version is None else f"'{name}' version {version}"
        raise NotFound(f"unknown method {which}; {_known(known, 'calib method add')}")
    return row


def refuse_taken_name(session: Session, name: str) -> None:
    """Refuse a name for a lot or a prepared solution that one of them has.

    Raises
    ------
    InputError
        Saying which of the two it is.
    """
    for table, what in ((tables.StandardLot, "standard lot"), (tables.Preparation, "prepared solution")):
        if session.scalar(select(table.id).where(table.name == name)) is not None:
            raise InputError(f"{what} '{name}' is registered already; choose another name")


def solution_named(session: Session, name: str) -> tables.StandardLot | tables.Preparation:
    """Standard lot or prepared solution of that name.

    Raises
    ------
    NotFound
        Naming those there are.
    """
    lot = session.scalar(select(tables.StandardLot).where(tables.StandardLot.name == name))
    if lot is not None:
        return lot
    prepared = session.scalar(select(tables.Preparation).where(tables.Preparation.name == name))
    if prepared is not None:
        return prepared
    known = [
        *session.scalars(select(tables.StandardLot.name).order_by(tables.StandardLot.name)),
        *session.scalars(select(tables.Preparation.name).order_by(tables.Preparation.name)),
    ]
    raise NotFound(f"unknown standard lot '{name}'; {_known(known, 'calib lot add')}")


def run_numbered(session: Session, number: int) -> tables.Run:
    """Run of that number.

    Raises
    ------
    NotFound
        Naming the last run there is.
    """
    row = session.get(tables.Run, number) if number <= LARGEST_KEY else None
    if row is None:
        last = session.scalar(select(func.max(tables.Run.id)))
        hint = f"the last one is {last}" if last else "none is logged yet"
        raise NotFound(f"there is no run {number}; {hint} (see calib run list)")
    return row


def facts_of(session: Session, run_id: int) -> tables.RunFacts:
    """Facts of a run in force."""
    return session.scalars(
        select(tables.RunFacts).where(tables.RunFacts.run_id == run_id, tables.is_current(tables.RunFacts))
    ).one()


def preparation_of(session: Session, facts: tables.RunFacts) -> tables.Preparation | None:
    """The prepared solution the standards of a run were made from, if one was named."""
    return session.scalar(
        select(tables.Preparation)
        .join(tables.RunSolution, tables.RunSolution.preparation_id == tables.Preparation.id)
        .where(tables.RunSolution.facts_id == facts.id)
    )


def void_of(session: Session, run_id: int) -> tables.RunVoid | None:
    """The decision that a run is void, if there is one."""
    return session.scalar(select(tables.RunVoid).where(tables.RunVoid.run_id == run_id))


def current_curve(session: Session, run_id: int) -> tables.Curve | None:
    """Curve of a run in force."""
    return session.scalar(
        select(tables.Curve).where(tables.Curve.run_id == run_id, tables.is_current(tables.Curve))
    )


def _known(names: Sequence[str], command: str) -> str:
    return f"known are {', '.join(names)} (add one with {command})" if names else f"add it with {command}"
