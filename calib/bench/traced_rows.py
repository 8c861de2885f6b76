"""Rows of the store as things of a trace, in words."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from datetime import date, datetime
from typing import Any

from sqlalchemy import Connection, Table, select

from calib import store as tables
from calib.bench.show_run import local
from calib.bench.trace_records import Traced, Tracing
from calib.store.entries import entry_of

TABLES = tables.Base.metadata.tables
# Where a kind of row lies on the way from a certificate to a report.
STAGES = {
    "standard_lot": 0,
    "instrument": 1,
    "method": 1,
    "original": 1,
    "run": 2,
    "curve": 3,
    "verdict": 3,
    "quantity": 5,
    "review": 6,
    "issued_report": 7,
}
TITLES = {
    "standard_lot": "standard lot",
    "original": "file",
    "issued_report": "report",
}
# Long or inner columns that say nothing to a reader of a trace.
SILENT = {
    "id",
    "supersedes",
    "content",
    "definition",
    "covariance",
    "bounds",
    "undetermined",
    "findings",
    "criteria",
    "exceptions",
    "budget",
    "offset_minutes",
    "utc_offset_minutes",
    "content_fingerprint",
}


def traced_row(
    connection: Connection,
    table: str,
    key: int,
    *,
    stage: int | None = None,
    more: Mapping[str, str] | None = None,
) -> Traced:
    """One row as a thing of a trace; ``more`` are facts beside its own columns."""
    row = row_of(connection, table, key)
    place = STAGES.get(table, 1) if stage is None else stage
    return Traced(
        key=f"{table} {key}",
        stage=place,
        title=_title(table, row),
        facts=(*_facts(table, row), *(more or {}).items()),
        superseded_by=_successor(connection, table, key),
        entry=entry_of(connection, table, key),
    )


def row_of(connection: Connection, table: str, key: int) -> Mapping[str, Any]:
    """One row by its number."""
    return connection.execute(select(TABLES[table]).where(TABLES[table].c.id == key)).one()._asdict()


def add_provenance(connection: Connection, tracing: Tracing, facts_id: int, leads_to: str) -> None:
    """Add the material behind a run: everything its facts lead up to, tables of a later day included."""
    facts = row_of(connection, "run_facts", facts_id)
    for parent, key in _named_rows(TABLES["run_facts"], facts):
        if parent != "run":
            _add_upwards(connection, tracing, parent, key, leads_to)
    for table in _tables_about("run_facts"):
        column = next(c for c, parent in _references(table) if parent == "run_facts")
        for row in connection.execute(select(table).where(table.c[column] == facts_id)):
            for parent, key in _named_rows(table, row._asdict()):
                if parent not in ("run", "run_facts"):
                    _add_upwards(connection, tracing, parent, key, leads_to)


def _add_upwards(connection: Connection, tracing: Tracing, table: str, key: int, leads_to: str) -> None:
    known = f"{table} {key}" in tracing.things
    added = tracing.add(traced_row(connection, table, key), leads_to)
    if known:
        return
    for parent, number in _named_rows(TABLES[table], row_of(connection, table, key)):
        _add_upwards(connection, tracing, parent, number, added)


def _tables_about(parent: str) -> Iterator[Table]:
    """Tables that only add to rows of another one: they name it and are no decision about a run."""
    for table in TABLES.values():
        if "run_id" not in table.columns and any(p == parent for _, p in _references(table)):
            yield table


def _references(table: Table) -> Iterator[tuple[str, str]]:
    """Columns that name rows of other tables, with the table; superseding is another matter."""
    for key in table.foreign_keys:
        if key.parent.name != "supersedes":
            yield key.parent.name, key.column.table.name


def _named_rows(table: Table, row: Mapping[str, Any]) -> Iterator[tuple[str, int]]:
    for column, parent in sorted(_references(table)):
        if row[column] is not None:
            yield parent, row[column]


def _title(table: str, row: Mapping[str, Any]) -> str:
    what = TITLES.get(table, table.replace("_", " "))
    name = row.get("name") or row.get("sample") or row["id"]
    version = f" version {row['version']}" if "version" in row else ""
    return f"{what} {name}{version}"


def _facts(table: str, row: Mapping[str, Any]) -> tuple[tuple[str, str], ...]:
    naming = {column for column, _ in _references(TABLES[table])}
    return tuple(
        (column.replace("_", " "), in_words(value))
        for column, value in row.items()
        if value not in (None, "", [], {}) and column not in SILENT | naming
    )


def in_words(value: Any) -> str:
    """A stored value as text; a dictionary as 'name value' pairs."""
    if isinstance(value, datetime):
        return f"{local(value, 0):%Y-%m-%d %H:%M:%S} UTC"
    if isinstance(value, date):
        return value.isoformat()
    if isinstance(value, float):
        return f"{value:.6g}"
    if isinstance(value, dict):
        return ", ".join(f"{name} {in_words(part)}" for name, part in value.items())
    if isinstance(value, list):
        return ", ".join(in_words(part) for part in value)
    return str(value)


def _successor(connection: Connection, table: str, key: int) -> str | None:
    columns = TABLES[table].c
    if "supersedes" not in columns:
        return None
    later = connection.scalar(select(columns.id).where(columns.supersedes == key))
    return None if later is None else f"{table} {later}"
