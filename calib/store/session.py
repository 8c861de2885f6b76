"""The store: read from it, or change it in one transaction with one entry in the record chain."""

import math
from collections.abc import Callable, Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass
from datetime import datetime
from pathlib import Path
from types import TracebackType
from typing import Any, Self

from sqlalchemy import Engine, Table, create_engine, event, inspect
from sqlalchemy.engine import Connection
from sqlalchemy.orm import ORMExecuteState, Session, UOWTransaction
from sqlalchemy.pool import QueuePool

from calib.errors import StoreError
from calib.store.base import Base
from calib.store.chain import ChainEntry, Deed, append_entry, chain_head
from calib.store.digests import canonical_json, key_of
from calib.store.files import connect_file, may_write
from calib.store.refusals import in_words

WRITING = "calib_writing"


def local_now() -> datetime:
    """Read the clock: the time with the offset of this computer's time zone."""
    return datetime.now().astimezone()


def connect_engine(path: Path, busy_seconds: float) -> Engine:
    """Make the engine of a store file: pragmas on each connection, transactions begun by us.

    Parameters
    ----------
    path : Path
        The SQLite file.
    busy_seconds : float
        How long to wait for another program that writes.
    """
    engine = create_engine(
        "sqlite://",
        creator=lambda: connect_file(path, busy_seconds),
        poolclass=QueuePool,
        json_serializer=canonical_json,
    )
    event.listen(engine, "connect", _set_pragmas)
    event.listen(engine, "begin", _begin)
    return engine


def _set_pragmas(connection: Any, _record: object) -> None:
    # The driver must not begin transactions of its own: it would begin them deferred.
    connection.isolation_level = None
    (name,) = [name for _, place, name in connection.execute("PRAGMA database_list") if place == "main"]
    journal = ("journal_mode = WAL",) if may_write(Path(name)) else ()
    for pragma in (
        *journal,
        "foreign_keys = ON",
        "recursive_triggers = ON",
        "synchronous = FULL",
    ):
        connection.execute(f"PRAGMA {pragma}").close()


def _begin(connection: Connection) -> None:
    writing = connection.get_execution_options().get(WRITING, False)
    connection.exec_driver_sql(f"PRAGMA query_only = {'OFF' if writing else 'ON'}")
    # A deferred transaction that reads and then writes fails with 'locked' whatever the timeout.
    connection.exec_driver_sql("BEGIN IMMEDIATE" if writing else "BEGIN")


@dataclass(frozen=True, slots=True)
class Store:
    """An open store; made by ``open_store``, closed by ``close`` or at the end of ``with``.

    Attributes
    ----------
    path : Path
        The SQLite file.
    engine : Engine
        Its connections, for reading.
    now : callable
        The clock; gives an aware time with the local offset.
    """

    path: Path
    engine: Engine
    now: Callable[[], datetime] = local_now

    @contextmanager
    def reading(self) -> Iterator[Session]:
        """Open a session that sees one state of the store and cannot change it.

        Raises
        ------
        StoreError
            If something was added or changed in the session, or the file cannot be read.
        """
        with in_words(self.path), Session(self.engine, autoflush=False) as session:
            event.listen(session, "before_flush", _refuse_flush)
            event.listen(session, "do_orm_execute", _refuse_statement)
            yield session
            if session.new or session.deleted or _changed(session):
                _refuse_flush(session, None, None)

    @contextmanager
    def change(self, action: str, by: str, reason: str | None = None) -> Iterator[Session]:
        """Change the store: one short transaction, one entry in the record chain.

        The write lock is held from the first line of the block to its last; read,
        fit and judge before it, and inside it check again what that relied on.

        Parameters
        ----------
        action : str
            What is done, in words, such as ``"log run"``.
        by : str
            Who does it. It records a name; it does not prove an identity.
        reason : str, optional
            Why; needed for corrections.

        Yields
        ------
        Session
            Add rows to it. It commits by itself at the end of the block, and undoes
            everything if the block raises.

        Raises
        ------
        StoreError
            If a row was changed or removed, holds a number that is not finite, breaks
            a rule of the schema, or if no row was added.
        StoreLocked
            If another program did not let go in time.
        """
        for name, word in (("action", action), ("by", by)):
            if not word.strip():
                raise StoreError(f"a change of the store needs {name!r} in words; it is empty")
        writing = self.engine.execution_options(**{WRITING: True})
        with in_words(self.path), Session(writing, expire_on_commit=False) as session:
            watch = _Watch(session)
            session.connection()
            yield session
            session.flush()
            append_entry(session.connection(), Deed(action, by, reason, self.now()), watch.added())
            watch.finished = True
            session.commit()

    def head(self) -> tuple[int, str]:
        """Sequence number and hash of the last entry of the record chain."""
        with in_words(self.path), self.engine.connect() as connection:
            last = chain_head(connection)
        return last.sequence, last.hash

    def close(self) -> None:
        """Let go of the file."""
        self.engine.dispose()

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.close()


class _Watch:
    """Sees every row that goes through a change, and lets nothing but new rows pass."""

    __slots__ = ("finished", "rows", "session")

    def __init__(self, session: Session) -> None:
        self.session = session
        self.rows: list[Base] = []
        self.finished = False
        event.listen(session, "before_flush", self._before_flush)
        event.listen(session, "before_commit", self._before_commit)
        event.listen(session, "do_orm_execute", _refuse_statement)

    def added(self) -> Mapping[Table, list[int]]:
        """Keys of the new rows by table; those of a savepoint that was undone are left out."""
        keys: dict[Table, list[int]] = {}
        for row in self.rows:
            state = inspect(row)
            if state.persistent and state.identity:
                keys.setdefault(_table(row), []).append(state.identity[0])
        if not keys:
            raise StoreError("this change adds no row to the store; nothing was written")
        return keys

    def _before_flush(self, session: Session, _context: UOWTransaction, _instances: object) -> None:
        touched = [*session.deleted, *_changed(session)]
        if touched:
            raise StoreError(
                f"a row of {_table(touched[0]).name} was changed or removed in the session; "
                "the store keeps every row: add one that supersedes it"
            )
        for row in session.new:
            _refuse_unfit(row)
        self.rows.extend(session.new)

    def _before_commit(self, session: Session) -> None:
        if not self.finished and not session.in_nested_transaction():
            raise StoreError("a change commits by itself at the end of its block; leave out session.commit()")


def _table(row: Base) -> Table:
    table = type(row).__table__
    if not isinstance(table, Table):
        raise StoreError(f"{type(row).__name__} is no table of the store")
    return table


def _changed(session: Session) -> list[Base]:
    return [row for row in session.dirty if session.is_modified(row, include_collections=False)]


def _refuse_flush(session: Session, _context: UOWTransaction | None, _instances: object) -> None:
    touched = [*session.new, *session.deleted, *_changed(session)]
    names = ", ".join(sorted({_table(row).name for row in touched}))
    raise StoreError(f"this session only reads, and {names} was added to or changed; use store.change")


def _refuse_statement(state: ORMExecuteState) -> None:
    if not state.is_select:
        raise StoreError("the store is changed by session.add in store.change only, not by statements")


def _refuse_unfit(row: Base) -> None:
    """Refuse what a database would bend without a word: SQLite turns NaN into NULL."""
    if isinstance(row, ChainEntry):
        raise StoreError("entries of the record chain are written by the store itself; leave them out")
    for column in _table(row).columns:
        if column is not key_of(_table(row)):
            _refuse_not_finite(getattr(row, column.key), f"{_table(row).name}.{column.name}")


def _refuse_not_finite(value: Any, place: str) -> None:
    if isinstance(value, float) and not math.isfinite(value):
        raise StoreError(f"{place} is {value}; store None where a value is undefined or an end is open")
    if isinstance(value, dict):
        for name, part in value.items():
            _refuse_not_finite(part, f"{place}[{name!r}]")
    if isinstance(value, list | tuple):
        for number, part in enumerate(value):
            _refuse_not_finite(part, f"{place}[{number}]")
