"""Solutions prepared from standard lots: registered, checked by a second person, shown as a tree."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import date

from sqlalchemy import select
from sqlalchemy.orm import Session

from calib import store as tables
from calib.bench.find import refuse_taken_name, solution_named
from calib.bench.names import plain_name
from calib.errors import InputError
from calib.quantification.budget import Component
from calib.quantification.preparation import Solution, Volume, certified, diluted
from calib.store.lots import VOLUME_UNITS

Row = tables.StandardLot | tables.Preparation


@dataclass(frozen=True, slots=True)
class PreparationRequest:
    """What was taken of which parent, and made up to what; volumes and their u in ``unit``."""

    name: str
    parent: str
    taken: float
    taken_u: float
    made_up_to: float
    made_up_to_u: float
    unit: str
    prepared_on: date
    prepared_by: str
    expiry: date | None = None
    checked_by: str | None = None


@dataclass(frozen=True, slots=True)
class SolutionRecord:
    """A lot or a prepared solution with its value, and what its uncertainty is made of.

    ``value`` and ``u`` are None where a certificate gives none. ``preparation`` says in
    words what was done, and is empty for a lot; ``depth`` is the number of steps from the lot.
    """

    name: str
    lot: str
    parent: str | None
    depth: int
    material: str
    preparation: str
    value: float | None
    u: float | None
    unit: str | None
    degrees_of_freedom: float | None
    parts: tuple[Component, ...]
    prepared_on: date | None
    prepared_by: str | None
    checked_by: str | None
    expiry: date | None


def prepare_solution(store: tables.Store, request: PreparationRequest, *, by: str) -> SolutionRecord:
    """Register a solution prepared from a lot or from another prepared solution.

    Raises
    ------
    NotFound
        When there is no such parent.
    InputError
        When the name is taken, the parent has no certified value with its uncertainty or had
        expired, a volume cannot be, or preparer and second person are the same.
    """
    _check_request(request)
    with store.change(action="prepare solution", by=by) as session:
        refuse_taken_name(session, request.name)
        parent = solution_named(session, request.parent)
        # Refuses volumes that cannot be, and a parent without a value.
        diluted(
            _known(session, parent),
            request.name,
            Volume(request.taken, request.taken_u),
            Volume(request.made_up_to, request.made_up_to_u),
        )
        _refuse_dates(request, parent)
        row = tables.Preparation(
            name=request.name,
            lot_id=parent.lot_id if isinstance(parent, tables.Preparation) else parent.id,
            parent_id=parent.id if isinstance(parent, tables.Preparation) else None,
            taken=request.taken,
            taken_u=request.taken_u,
            made_up_to=request.made_up_to,
            made_up_to_u=request.made_up_to_u,
            unit=request.unit,
            prepared_on=request.prepared_on,
            prepared_by=request.prepared_by,
            expiry=request.expiry or parent.expiry,
            added_at=store.now(),
            added_by=by,
        )
        session.add(row)
        session.flush()
        if request.checked_by:
            session.add(tables.PreparationCheck(preparation_id=row.id, by=request.checked_by, at=store.now()))
    return show_solution(store, request.name)[-1]


def confirm_preparation(store: tables.Store, name: str, *, by: str) -> SolutionRecord:
    """Record the second person's check of a prepared solution.

    Raises
    ------
    InputError
        When it is no prepared solution, is checked already, or the preparer checks it.
    """
    with store.change(action="check preparation", by=by) as session:
        row = solution_named(session, name)
        if not isinstance(row, tables.Preparation):
            raise InputError(f"'{name}' is a standard lot and was not prepared here; nothing to check")
        checked = _check_of(session, row)
        if checked is not None:
            raise InputError(f"prepared solution '{name}' was checked by {checked.by} already")
        _refuse_same_person(row.prepared_by, by)
        session.add(tables.PreparationCheck(preparation_id=row.id, by=by, at=store.now()))
    return show_solution(store, name)[-1]


def show_solution(store: tables.Store, name: str) -> tuple[SolutionRecord, ...]:
    """The way from the lot to a solution, the lot first and the solution itself last.

    Raises
    ------
    NotFound
        Naming the lots and solutions there are.
    """
    with store.reading() as session:
        row = solution_named(session, name)
        return tuple(_record(session, step) for step in _way_to(session, row))


def solutions_from(store: tables.Store, name: str) -> tuple[SolutionRecord, ...]:
    """Everything prepared from a lot or solution, each after the one it was prepared from."""
    with store.reading() as session:
        row = solution_named(session, name)
        return tuple(_record(session, r) for r in _descendants(session, row))


def list_solutions(store: tables.Store) -> tuple[SolutionRecord, ...]:
    """Every lot, each followed by the tree of what was prepared from it."""
    with store.reading() as session:
        lots = session.scalars(select(tables.StandardLot).order_by(tables.StandardLot.name)).all()
        rows: list[Row] = []
        for lot in lots:
            rows += [lot, *_descendants(session, lot)]
        return tuple(_record(session, r) for r in rows)


def solution_of(session: Session, row: Row) -> Solution | None:
    """Value and relative uncertainties of a lot or prepared solution; None where the certificate lacks them."""
    if isinstance(row, tables.StandardLot):
        if row.certified_value is None or row.expanded_uncertainty is None or row.coverage_factor is None:
            return None
        freedom = float("inf") if row.degrees_of_freedom is None else row.degrees_of_freedom
        u = row.expanded_uncertainty / row.coverage_factor
        return certified(row.name, row.certified_value, u, freedom)
    parent = solution_of(session, _parent(session, row))
    if parent is None:
        return None
    return diluted(parent, row.name, Volume(row.taken, row.taken_u), Volume(row.made_up_to, row.made_up_to_u))


def _known(session: Session, row: Row) -> Solution:
    solution = solution_of(session, row)
    if solution is None:
        raise InputError(
            f"standard lot '{row.name}' has no certified value with its U and k, so nothing prepared from it has; "
            "register a lot with them"
        )
    return solution


def _parent(session: Session, row: tables.Preparation) -> Row:
    if row.parent_id is None:
        return session.get_one(tables.StandardLot, row.lot_id)
    return session.get_one(tables.Preparation, row.parent_id)


def _way_to(session: Session, row: Row) -> list[Row]:
    way = [row]
    while isinstance(way[0], tables.Preparation):
        way.insert(0, _parent(session, way[0]))
    return way


def _descendants(session: Session, row: Row) -> list[tables.Preparation]:
    query = select(tables.Preparation).order_by(tables.Preparation.prepared_on, tables.Preparation.id)
    if isinstance(row, tables.StandardLot):
        query = query.where(tables.Preparation.lot_id == row.id, tables.Preparation.parent_id.is_(None))
    else:
        query = query.where(tables.Preparation.parent_id == row.id)
    return [r for child in session.scalars(query).all() for r in (child, *_descendants(session, child))]


def _check_of(session: Session, row: tables.Preparation) -> tables.PreparationCheck | None:
    return session.scalar(
        select(tables.PreparationCheck).where(tables.PreparationCheck.preparation_id == row.id)
    )


def _record(session: Session, row: Row) -> SolutionRecord:
    solution = solution_of(session, row)
    way = _way_to(session, row)
    lot = way[0]
    assert isinstance(lot, tables.StandardLot)
    prepared = row if isinstance(row, tables.Preparation) else None
    check = _check_of(session, prepared) if prepared else None
    return SolutionRecord(
        name=row.name,
        lot=lot.name,
        parent=way[-2].name if prepared else None,
        depth=len(way) - 1,
        material=lot.material,
        preparation=_in_words(prepared, way[-2].name) if prepared else "",
        value=solution.value if solution else lot.certified_value,
        u=solution.u if solution else None,
        unit=lot.unit,
        degrees_of_freedom=solution.degrees_of_freedom if solution else None,
        parts=solution.parts if solution else (),
        prepared_on=prepared.prepared_on if prepared else None,
        prepared_by=prepared.prepared_by if prepared else None,
        checked_by=check.by if check else None,
        expiry=row.expiry,
    )


def _in_words(row: tables.Preparation, parent: str) -> str:
    return f"{row.taken:g} {row.unit} of {parent} made up to {row.made_up_to:g} {row.unit}"


def _check_request(request: PreparationRequest) -> None:
    plain_name(request.name, "the name of the solution")
    plain_name(request.prepared_by, "the name of the preparer")
    if request.unit not in VOLUME_UNITS:
        raise InputError(f"unknown unit of volume '{request.unit}'; known are {', '.join(VOLUME_UNITS)}")
    if request.checked_by:
        plain_name(request.checked_by, "the name of the second person")
        _refuse_same_person(request.prepared_by, request.checked_by)


def _refuse_same_person(preparer: str, second: str) -> None:
    if preparer.strip().casefold() == second.strip().casefold():
        raise InputError(f"{second} prepared it; a second person has to check it")


def _refuse_dates(request: PreparationRequest, parent: Row) -> None:
    if parent.expiry is not None and request.prepared_on > parent.expiry:
        raise InputError(
            f"'{parent.name}' expired on {parent.expiry.isoformat()}, before {request.prepared_on.isoformat()}; "
            "prepare the solution from one in date"
        )
    if isinstance(parent, tables.Preparation) and request.prepared_on < parent.prepared_on:
        raise InputError(
            f"'{parent.name}' was prepared on {parent.prepared_on.isoformat()}, after "
            f"{request.prepared_on.isoformat()}; correct the date"
        )
    if request.expiry is None:
        return
    if request.expiry < request.prepared_on:
        raise InputError(
            f"an expiry of {request.expiry.isoformat()} lies before the day of preparation, "
            f"{request.prepared_on.isoformat()}; correct one of the two"
        )
    if parent.expiry is not None and request.expiry > parent.expiry:
        raise InputError(
            f"an expiry of {request.expiry.isoformat()} lies after that of '{parent.name}', "
            f"{parent.expiry.isoformat()}; a solution keeps no longer than what it is made of"
        )
