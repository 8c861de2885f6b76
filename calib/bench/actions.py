"""Corrective actions: opened with the results they affect, closed with what was done."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime

from sqlalchemy import select
from sqlalchemy.orm import Session

from calib import store as tables
from calib.bench.find import LARGEST_KEY
from calib.bench.trace_forward import AffectedQuantity, affected_quantities, trace_forward
from calib.errors import InputError, NotFound


@dataclass(frozen=True, slots=True)
class ActionRecord:
    """A corrective action; ``closed_at`` and what follows are None while it is open."""

    number: int
    what: str
    kind: str
    name: str
    since: datetime | None
    until: datetime | None
    by: str
    at: datetime
    results: int
    correction: str | None
    effect: str | None
    closed_by: str | None
    closed_at: datetime | None

    @property
    def open(self) -> bool:
        """Whether nothing was said to close it."""
        return self.closed_at is None


def open_action(
    store: tables.Store,
    kind: str,
    name: str,
    *,
    what: str,
    by: str,
    since: datetime | None = None,
    until: datetime | None = None,
) -> ActionRecord:
    """Open an action about a lot, instrument, method, file, layout, curve or run.

    The results in force that rest on it, of runs measured in the window, are kept with it.

    Raises
    ------
    NotFound
        When there is no such thing.
    InputError
        When nothing is said, or the window is empty.
    """
    if not what.strip():
        raise InputError("say in words what went wrong")
    since, until = _aware(store, since), _aware(store, until)
    if since and until and until < since:
        raise InputError("the window ends before it begins; correct --since and --until")
    affected = [
        q
        for q in trace_forward(store, kind, name).quantities
        if q.superseded_by is None
        and not q.withdrawn
        and (since is None or q.measured >= since)
        and (until is None or q.measured <= until)
    ]
    with store.change(action="open action", by=by, reason=what) as session:
        row = tables.Action(what=what, kind=kind, name=name, since=since, until=until, by=by, at=store.now())
        session.add(row)
        session.flush()
        session.add_all(tables.ActionResult(action_id=row.id, quantity_id=q.number) for q in affected)
        number = row.id
    return show_action(store, number)[0]


def close_action(store: tables.Store, number: int, *, correction: str, effect: str, by: str) -> ActionRecord:
    """Close an action: what was done, and how it is known to have helped.

    Raises
    ------
    InputError
        When it is closed already, or a text is empty.
    """
    if not correction.strip() or not effect.strip():
        raise InputError("an action is closed with what was done, and how it is known to have helped")
    with store.change(action="close action", by=by, reason=correction) as session:
        _numbered(session, number)
        closure = _closure(session, number)
        if closure is not None:
            raise InputError(f"action {number} was closed already, by {closure.by}: {closure.correction}")
        session.add(
            tables.ActionClosure(
                action_id=number, correction=correction, effect=effect, by=by, at=store.now()
            )
        )
    return show_action(store, number)[0]


def list_actions(store: tables.Store, *, only_open: bool = False) -> tuple[ActionRecord, ...]:
    """Actions in the order they were opened."""
    with store.reading() as session:
        rows = session.scalars(select(tables.Action).order_by(tables.Action.id)).all()
        found = [_record(session, row) for row in rows]
    return tuple(a for a in found if a.open or not only_open)


def show_action(store: tables.Store, number: int) -> tuple[ActionRecord, tuple[AffectedQuantity, ...]]:
    """An action, and the results it affected as they stand now.

    Raises
    ------
    NotFound
        When there is no such action.
    """
    with store.reading() as session:
        record = _record(session, _numbered(session, number))
        query = select(tables.ActionResult.quantity_id).where(tables.ActionResult.action_id == number)
        return record, affected_quantities(session, sorted(session.scalars(query)))


def _numbered(session: Session, number: int) -> tables.Action:
    row = session.get(tables.Action, number) if number <= LARGEST_KEY else None
    if row is None:
        raise NotFound(f"there is no action {number}; see calib action list")
    return row


def _closure(session: Session, number: int) -> tables.ActionClosure | None:
    return session.scalar(select(tables.ActionClosure).where(tables.ActionClosure.action_id == number))


def _record(session: Session, row: tables.Action) -> ActionRecord:
    closure = _closure(session, row.id)
    results = session.scalars(
        select(tables.ActionResult.id).where(tables.ActionResult.action_id == row.id)
    ).all()
    return ActionRecord(
        number=row.id,
        what=row.what,
        kind=row.kind,
        name=row.name,
        since=row.since,
        until=row.until,
        by=row.by,
        at=row.at,
        results=len(results),
        correction=closure.correction if closure else None,
        effect=closure.effect if closure else None,
        closed_by=closure.by if closure else None,
        closed_at=closure.at if closure else None,
    )


def _aware(store: tables.Store, at: datetime | None) -> datetime | None:
    """A time without an offset is that of this computer's clock."""
    return at if at is None or at.tzinfo else at.replace(tzinfo=store.now().tzinfo)
