"""From a lot, instrument, curve, layout, method or file forward to every affected quantity."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from datetime import datetime

from sqlalchemy import Connection, select
from sqlalchemy.orm import Session

from calib import store as tables
from calib.bench.find import LARGEST_KEY
from calib.bench.keeping_quantities import WITHDRAWN
from calib.bench.review_state import review_states
from calib.bench.show_run import local
from calib.errors import NotFound

_TABLES = tables.Base.metadata.tables
# What a trace may start from: the word, its table, and the column a person names it by.
STARTS = {
    "lot": ("standard_lot", "name"),
    "instrument": ("instrument", "name"),
    "method": ("method", "name"),
    "file": ("original", "name"),
    "layout": ("run", "layout"),
    "curve": ("curve", "id"),
    "run": ("run", "id"),
}
# Rows that tell of a run without making results, and there are many of them.
TELLING = ("reading", "exclusion", "curve_standard", "verdict", "run_void", "event", "action_result")
AT_ONCE = 500


@dataclass(frozen=True, slots=True)
class AffectedQuantity:
    """One result that rests on what the trace started from.

    ``superseded_by`` is the number of the quantity that replaced it, None while in force;
    ``reports`` are numbers of issued reports of its run.
    """

    number: int
    run: int
    measured: datetime
    instrument: str
    method: str
    sample: str
    role: str
    concentration: float | None
    unit: str
    curve: int
    superseded_by: int | None
    withdrawn: bool
    review: str
    void: bool
    reports: tuple[int, ...]


@dataclass(frozen=True, slots=True)
class Affected:
    """Everything that rests on one thing, with the head of the record chain."""

    start: str
    runs: tuple[int, ...]
    curves: tuple[int, ...]
    quantities: tuple[AffectedQuantity, ...]
    reports: tuple[int, ...]
    others: tuple[str, ...]
    chain_sequence: int
    chain_head: str


def trace_forward(store: tables.Store, kind: str, name: str) -> Affected:
    """Every quantity that a lot, instrument, method, file, layout, curve or run affects.

    Void runs and superseded quantities are in it, and say so.

    Raises
    ------
    NotFound
        For an unknown kind or name.
    """
    head = store.head()
    with store.reading() as session:
        found = _closure(session.connection(), *_start(session, kind, name))
        quantities = affected_quantities(session, sorted(found.get("quantity", ())))
    known = ("run", "run_facts", "curve", "quantity", "issued_report", "review", STARTS[kind][0])
    others = tuple(
        f"{table.replace('_', ' ')} {number}"
        for table, numbers in sorted(found.items())
        if table not in known
        for number in sorted(numbers)
    )
    reports = {number for q in quantities for number in q.reports}
    return Affected(
        start=f"{kind} {name}",
        runs=tuple(sorted(found.get("run", set()) | {q.run for q in quantities})),
        curves=tuple(sorted(found.get("curve", ()))),
        quantities=quantities,
        reports=tuple(sorted(found.get("issued_report", set()) | reports)),
        others=others,
        chain_sequence=head[0],
        chain_head=head[1],
    )


def _start(session: Session, kind: str, name: str) -> tuple[str, set[int]]:
    if kind not in STARTS:
        raise NotFound(f"a trace cannot start from '{kind}'; known are result, {', '.join(STARTS)}")
    table, column = STARTS[kind]
    columns = _TABLES[table].c
    if column == "id":
        numbers = {int(name)} if name.isdecimal() and int(name) <= LARGEST_KEY else set()
        query = select(columns.id).where(columns.id.in_(numbers))
    else:
        query = select(columns.id).where(columns[column] == name)
        if kind == "file":
            query = select(columns.id).where((columns.name == name) | (columns.fingerprint == name))
    found = set(session.scalars(query))
    if not found:
        raise NotFound(f"there is no {kind} '{name}' in the store")
    return table, found


def _closure(connection: Connection, table: str, numbers: set[int]) -> dict[str, set[int]]:
    """Every row that names an affected row, and the rows it belongs to, until nothing new is found.

    The references are read from the tables themselves, so that a later table takes part at once.
    """
    found: dict[str, set[int]] = {table: set(numbers)}
    waiting = [(table, numbers)]
    while waiting:
        parent, fresh = waiting.pop()
        for child, reached in (*_naming(connection, parent, fresh), *_owners(connection, parent, fresh)):
            new = reached - found.setdefault(child, set())
            if new:
                found[child] |= new
                waiting.append((child, new))
    return found


def _naming(connection: Connection, parent: str, numbers: set[int]) -> Iterator[tuple[str, set[int]]]:
    for name, table in _TABLES.items():
        if name in TELLING:
            continue
        for key in table.foreign_keys:
            if key.column.table.name == parent and key.parent.name != "supersedes":
                yield name, _numbers(connection, name, key.parent.name, numbers, "id")


def _owners(connection: Connection, table: str, numbers: set[int]) -> Iterator[tuple[str, set[int]]]:
    """What a row belongs to that states facts of a run: these facts, or the run."""
    columns = _TABLES[table].columns
    if table == "run_facts":
        yield "run", _numbers(connection, table, "id", numbers, "run_id")
    elif "facts_id" in columns and "run_id" not in columns:
        yield "run_facts", _numbers(connection, table, "id", numbers, "facts_id")


def _numbers(connection: Connection, name: str, where: str, numbers: set[int], what: str) -> set[int]:
    columns = _TABLES[name].c
    found: set[int] = set()
    for some in _pieces(sorted(numbers)):
        query = select(columns[what]).where(columns[where].in_(some), columns[what].is_not(None))
        found.update(connection.scalars(query))
    return found


def _pieces(numbers: Sequence[int]) -> Iterator[Sequence[int]]:
    for first in range(0, len(numbers), AT_ONCE):
        yield numbers[first : first + AT_ONCE]


def affected_quantities(session: Session, numbers: Sequence[int]) -> tuple[AffectedQuantity, ...]:
    """Quantities by their numbers, as they stand now."""
    row, facts = tables.QuantityRow, tables.RunFacts
    found: list[AffectedQuantity] = []
    states = review_states(session) if numbers else {}
    reports = _reports(session)
    for some in _pieces(numbers):
        successors = select(row.supersedes, row.id).where(row.supersedes.in_(some))
        later = {r[0]: r[1] for r in session.execute(successors)}
        query = (
            select(row, facts.at, facts.offset_minutes, tables.Instrument.name, tables.Method.name)
            .add_columns(tables.RunVoid.id)
            .join(tables.Run, tables.Run.id == row.run_id)
            .join(facts, facts.run_id == row.run_id)
            .join(tables.Instrument, tables.Instrument.id == facts.instrument_id)
            .join(tables.Method, tables.Method.id == tables.Run.method_id)
            .outerjoin(tables.RunVoid, tables.RunVoid.run_id == row.run_id)
            .where(row.id.in_(some), tables.is_current(facts))
            .order_by(row.id)
        )
        for q, at, offset, instrument, method, void in session.execute(query):
            found.append(
                AffectedQuantity(
                    number=q.id,
                    run=q.run_id,
                    measured=local(at, offset),
                    instrument=instrument,
                    method=method,
                    sample=q.sample,
                    role=q.role,
                    concentration=q.concentration if q.position == "inside" else None,
                    unit=q.unit,
                    curve=q.curve_id,
                    superseded_by=later.get(q.id),
                    withdrawn=WITHDRAWN in q.flags,
                    review=states[q.run_id].state,
                    void=void is not None,
                    reports=reports.get(q.run_id, ()),
                )
            )
    return tuple(found)


def _reports(session: Session) -> dict[int, tuple[int, ...]]:
    found: dict[int, tuple[int, ...]] = {}
    query = select(tables.IssuedReport.run_id, tables.IssuedReport.id).order_by(tables.IssuedReport.id)
    for run, number in session.execute(query):
        found[run] = (*found.get(run, ()), number)
    return found
