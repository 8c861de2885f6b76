"""The full history of one record: every row about it, entry by entry of the record chain."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from datetime import datetime
from typing import Any

from sqlalchemy import Connection, Row, Table, select

from calib import store as tables
from calib.bench.find import LARGEST_KEY
from calib.bench.show_run import local
from calib.errors import NotFound
from calib.store.entries import entry_of, recorded_rows
from calib.store.triggers import EVIDENCE_TABLES

_TABLES = tables.Base.metadata.tables
# What a person calls a table, where it is not the table's own name.
WORDS = {"lot": "standard_lot", "file": "original", "report": "issued_report"}
KINDS = tuple(
    sorted({*WORDS, *EVIDENCE_TABLES} - {"standard_lot", "original", "issued_report", "record_chain"})
)
LEFT_OUT = ("id", "supersedes", "content")


@dataclass(frozen=True, slots=True)
class RowStep:
    """One row: new, or a version over another one, with what changed from and to."""

    table: str
    id: int
    supersedes: int | None
    changes: tuple[tuple[str, Any, Any], ...]


@dataclass(frozen=True, slots=True)
class HistoryStep:
    """One entry of the record chain, and the rows of the record that came with it.

    ``sequence`` is None for rows that no entry names: the store check says more.
    """

    sequence: int | None
    at: datetime | None
    by: str
    action: str
    reason: str | None
    rows: tuple[RowStep, ...]


def history_of_record(store: tables.Store, kind: str, name: str) -> tuple[HistoryStep, ...]:
    """Everything that happened to one record, oldest first.

    Parameters
    ----------
    kind : str
        One of ``KINDS``: an evidence table by the word people use.
    name : str
        The number of a row, or the name where such records have one.

    Raises
    ------
    NotFound
        For an unknown kind, or when there is no such record.
    """
    if kind not in KINDS:
        raise NotFound(f"there are no records called '{kind}'; known are {', '.join(KINDS)}")
    table = _TABLES[WORDS.get(kind, kind)]
    with store.reading() as session:
        connection = session.connection()
        rows = _with_versions(connection, table, _found(connection, table, kind, name))
        held = {table.name: rows, **(_parts_of_runs(connection, rows) if table.name == "run" else {})}
        return tuple(_steps(connection, held))


def _found(connection: Connection, table: Table, kind: str, name: str) -> Sequence[Row[Any]]:
    key = table.primary_key.columns.values()[0]
    if name.isdecimal() and int(name) <= LARGEST_KEY:
        rows = connection.execute(select(table).where(key == int(name))).all()
        if rows:
            return rows
    if "name" in table.columns:
        rows = connection.execute(select(table).where(table.c.name == name)).all()
        if rows:
            return rows
    raise NotFound(f"there is no {kind} '{name}' in the store")


def _with_versions(
    connection: Connection, table: Table, rows: Sequence[Row[Any]]
) -> dict[int, Mapping[str, Any]]:
    """The rows, and every version before and after them."""
    held: dict[int, Mapping[str, Any]] = {row.id: row._asdict() for row in rows}
    if "supersedes" not in table.columns:
        return held
    fresh = list(held)
    while fresh:
        older = [held[n]["supersedes"] for n in fresh if held[n]["supersedes"] is not None]
        query = select(table).where(table.c.id.in_(older) | table.c.supersedes.in_(fresh))
        found = {r.id: r._asdict() for r in connection.execute(query) if r.id not in held}
        held.update(found)
        fresh = list(found)
    return held


def _parts_of_runs(
    connection: Connection, runs: Mapping[int, Mapping[str, Any]]
) -> dict[str, dict[int, Mapping[str, Any]]]:
    """Rows of every table that names the runs, and of tables that name only such rows."""
    parts: dict[str, dict[int, Mapping[str, Any]]] = {}
    names = [name for name in EVIDENCE_TABLES if name not in ("run", "record_chain")]
    for name in names:
        if "run_id" in _TABLES[name].columns:
            parts[name] = _naming(connection, _TABLES[name], "run_id", runs)
    for name in names:
        owner = next((p for p in parts if f"{p}_id" in _TABLES[name].columns), None)
        if name not in parts and owner is not None:
            parts[name] = _naming(connection, _TABLES[name], f"{owner}_id", parts[owner])
    return parts


def _naming(
    connection: Connection, table: Table, column: str, owners: Mapping[int, object]
) -> dict[int, Mapping[str, Any]]:
    query = select(table).where(table.c[column].in_(list(owners)))
    return {row.id: row._asdict() for row in connection.execute(query)}


def _steps(connection: Connection, held: Mapping[str, Mapping[int, Mapping[str, Any]]]) -> list[HistoryStep]:
    left = {name: set(rows) for name, rows in held.items()}
    steps = []
    while any(left.values()):
        name = next(n for n, keys in left.items() if keys)
        sequence = entry_of(connection, name, min(left[name]))
        recorded = recorded_rows(connection, sequence) if sequence else {name: {min(left[name])}}
        rows: list[RowStep] = []
        for table, keys in left.items():
            now = sorted(keys & recorded.get(table, set()))
            keys.difference_update(now)
            rows.extend(_row_step(table, held[table], key) for key in now)
        steps.append(_step(connection, sequence, rows))
    return sorted(steps, key=lambda step: step.sequence or 0)


def _row_step(table: str, held: Mapping[int, Mapping[str, Any]], key: int) -> RowStep:
    row = held[key]
    older = held.get(row.get("supersedes") or 0)
    changes = (
        tuple(
            (column, older[column], value)
            for column, value in row.items()
            if column not in LEFT_OUT and older[column] != value
        )
        if older
        else ()
    )
    return RowStep(table, key, row.get("supersedes"), changes)


def _step(connection: Connection, sequence: int | None, rows: Sequence[RowStep]) -> HistoryStep:
    chain = _TABLES["record_chain"]
    entry = connection.execute(select(chain).where(chain.c.sequence == sequence)).one_or_none()
    if entry is None:
        return HistoryStep(None, None, "", "in no entry of the record chain", None, tuple(rows))
    at = local(entry.at, entry.offset_minutes)
    return HistoryStep(sequence, at, entry.by, entry.action, entry.reason, tuple(rows))
