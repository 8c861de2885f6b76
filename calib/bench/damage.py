"""What a check found, told as the first entry that no longer holds and what rests on the damage."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Protocol

from sqlalchemy import Connection, select

from calib import store as tables
from calib.errors import CalibError
from calib.store.entries import recorded_rows
from calib.store.findings import DAMAGE

_TABLES = tables.Base.metadata.tables


class Found(Protocol):
    """What is needed of a finding."""

    @property
    def place(self) -> str:
        """A table and row, an entry, or the file."""

    @property
    def entry(self) -> int | None:
        """The entry of the record chain that no longer holds."""


@dataclass(frozen=True, slots=True)
class Damage:
    """Where the record breaks first, and what depends on the damaged rows.

    Attributes
    ----------
    first_entry : int or None
        The first entry of the record chain that no longer holds.
    first : str
        What was found there, in words: where.
    runs, reports : tuple of int
        Runs whose rows are damaged, or that were read on the curve of such a run, and the
        reports that were issued of them.
    """

    first_entry: int | None
    first: str
    runs: tuple[int, ...]
    reports: tuple[int, ...]


def damage_of(store: tables.Store, findings: Sequence[Found]) -> Damage | None:
    """Sum findings up; None where there are none. A file that cannot be read names no runs."""
    if not findings:
        return None
    dated = [f for f in findings if f.entry is not None]
    first = min(dated, key=lambda f: f.entry or 0) if dated else findings[0]
    try:
        with store.reading() as session:
            runs = _runs(session.connection(), findings)
            reports = session.scalars(
                select(tables.IssuedReport.id).where(tables.IssuedReport.run_id.in_(runs))
            ).all()
    except (CalibError, *DAMAGE):
        runs, reports = set(), []
    return Damage(first.entry, first.place, tuple(sorted(runs)), tuple(sorted(reports)))


def _runs(connection: Connection, findings: Iterable[Found]) -> set[int]:
    found: set[int] = set()
    for finding in findings:
        table, _, number = finding.place.rpartition(" ")
        if not number.isdecimal():
            continue
        if table == "entry":
            found |= recorded_rows(connection, int(number)).get("run", set())
        elif table in _TABLES:
            found |= _runs_of_row(connection, table, int(number))
    users = (
        select(tables.Run.id)
        .join(tables.Curve, tables.Curve.id == tables.Run.curve_id)
        .where(tables.Curve.run_id.in_(found))
    )
    return found | set(connection.scalars(users))


def _runs_of_row(connection: Connection, table: str, number: int) -> set[int]:
    """The runs a row belongs to, or those that name it."""
    if table == "run":
        return {number}
    columns = _TABLES[table].c
    if "run_id" in columns:
        return set(connection.scalars(select(columns.run_id).where(columns.id == number)))
    for owner in ("curve", "reading"):
        if f"{owner}_id" in columns:
            numbers = connection.scalars(select(columns[f"{owner}_id"]).where(columns.id == number))
            return {run for n in numbers for run in _runs_of_row(connection, owner, n)}
    naming = (
        (name, key.parent.name)
        for name in ("run", "run_facts")
        for key in _TABLES[name].foreign_keys
        if key.column.table.name == table
    )
    found: set[int] = set()
    for name, column in naming:
        source = _TABLES[name].c
        run = source.id if name == "run" else source.run_id
        found |= set(connection.scalars(select(run).where(source[column] == number)))
    return found
