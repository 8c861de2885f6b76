"""What the check of a store finds, and how it goes on after damage."""

import sqlite3
from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from sqlalchemy import Connection, Table
from sqlalchemy.exc import SQLAlchemyError

from calib.store.digests import batches, key_of, stored_rows

# What reading a damaged file can raise, from SQLite down to the conversion of one cell.
DAMAGE = (
    SQLAlchemyError,
    sqlite3.Error,
    ValueError,
    TypeError,
    LookupError,
    OverflowError,
    AttributeError,
)


@dataclass(frozen=True, slots=True)
class StoreFinding:
    """One thing that is wrong with a store.

    Attributes
    ----------
    code : str
        Kind of the finding, such as ``"row-changed"``.
    place : str
        Where: a table and row number, an entry of the chain, or the file.
    message : str
        What is wrong, in one line.
    entry : int or None
        The entry of the record chain that no longer holds; None where none can be named.
    """

    code: str
    place: str
    message: str
    entry: int | None = None


@dataclass(frozen=True, slots=True)
class Unreadable:
    """A row that is there but cannot be read, and why."""

    why: str


def one_line(error: BaseException) -> str:
    """First line of what an exception says."""
    orig = getattr(error, "orig", None) or error
    return (str(orig).splitlines() or [type(orig).__name__])[0]


def going_on(
    what: str, step: Callable[[Connection], Iterable[StoreFinding]], connection: Connection
) -> Iterator[StoreFinding]:
    """Run one step of a check; damage that stops it becomes a finding of its own."""
    try:
        yield from step(connection)
    except DAMAGE as error:
        yield StoreFinding("unreadable", "file", f"{what} cannot be checked to the end: {one_line(error)}")


def read_each(
    connection: Connection, table: Table, keys: Sequence[int]
) -> Iterator[tuple[int, Mapping[str, Any] | Unreadable | None]]:
    """Read rows by key, each with its columns, or None if missing, or why it cannot be read."""
    for some in batches(table, keys):
        try:
            found = _read(connection, table, some)
        except DAMAGE:
            yield from ((key, _read_one(connection, table, key)) for key in some)
        else:
            yield from ((key, found.get(key)) for key in some)


def _read(connection: Connection, table: Table, keys: Sequence[int]) -> dict[int, Mapping[str, Any]]:
    key = key_of(table).name
    rows = (row._asdict() for row in stored_rows(connection, table, keys))
    return {row[key]: row for row in rows}


def _read_one(connection: Connection, table: Table, key: int) -> Mapping[str, Any] | Unreadable | None:
    try:
        return _read(connection, table, [key]).get(key)
    except DAMAGE as error:
        return Unreadable(one_line(error))
