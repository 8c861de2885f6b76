"""Bring an older store to the schema of this calib, with a backup first."""

from collections.abc import Callable, Iterator, Mapping
from contextlib import closing, contextmanager, suppress
from dataclasses import dataclass
from datetime import datetime
from pathlib import Path

from sqlalchemy import Connection, Engine, inspect

from calib.errors import SchemaTooOld, StoreDamaged
from calib.store.backup import copy_into
from calib.store.check_schema import trigger_findings
from calib.store.files import connect_file, new_file
from calib.store.migrating import migrate
from calib.store.opening import BUSY_SECONDS, store_path
from calib.store.refusals import files_in_words, in_words
from calib.store.schema import newest_revision, read_revision, require_current
from calib.store.session import connect_engine, local_now
from calib.store.triggers import EVIDENCE_TABLES


@dataclass(frozen=True, slots=True)
class Upgrade:
    """What an upgrade did; ``backup`` is None where there was nothing to do.

    Attributes
    ----------
    before, after : str
        Revision of the schema.
    backup : Path or None
        Copy of the store as it was.
    rows : mapping
        Table to its number of rows, the same before and after.
    """

    path: Path
    before: str
    after: str
    backup: Path | None
    rows: Mapping[str, int]


def upgrade_store(
    url_or_path: str | Path,
    *,
    busy_seconds: float = BUSY_SECONDS,
    now: Callable[[], datetime] = local_now,
) -> Upgrade:
    """Upgrade a store in one transaction, after a backup beside it.

    Parameters
    ----------
    url_or_path : str or Path
        A path, or ``sqlite:///path``.
    busy_seconds : float
        How long to wait, in seconds, for another program that writes.
    now : callable
        The clock, for the name of the backup.

    Returns
    -------
    Upgrade
        Schemas, backup and rows.

    Raises
    ------
    StoreDamaged
        If the file is damaged, or the migration would lose rows, references or
        triggers; the store is then as it was before.
    NotFound, NotAStore, SchemaTooNew, StoreLocked, StoreError
        If the store cannot be upgraded.
    """
    path = store_path(url_or_path)
    before = read_revision(path)
    with suppress(SchemaTooOld):
        require_current(path)
        return Upgrade(path, before, before, None, {})
    engine = connect_engine(path, busy_seconds)
    rows: dict[str, int] = {}
    try:
        with in_words(path):
            backup = _back_up(engine, path, f"schema-{before}-{now():%Y%m%dT%H%M%S%f}")
            migrate(engine, around=lambda connection: _nothing_lost(connection, rows))
    finally:
        engine.dispose()
    return Upgrade(path, before, newest_revision(), backup, rows)


def _back_up(engine: Engine, path: Path, mark: str) -> Path:
    backup = path.with_name(f"{path.stem}-{mark}{path.suffix}")
    with files_in_words("write the backup", backup), new_file(backup) as draft:
        copy_into(engine, draft)
        with closing(connect_file(draft)) as copy:
            (state,) = copy.execute("PRAGMA integrity_check").fetchone()
        if state != "ok":
            raise StoreDamaged(
                f"the store {path} is damaged ({state}); go back to a backup, and keep this file"
            )
    return backup


@contextmanager
def _nothing_lost(connection: Connection, rows: dict[str, int]) -> Iterator[None]:
    """Compare before and after inside the transaction; what is raised here undoes the migration."""
    rows.update(_row_counts(connection))
    yield
    after = _row_counts(connection)
    for table, count in rows.items():
        if after.get(table) != count:
            raise StoreDamaged(
                f"the migration would leave {after.get(table, 0)} of {count} rows of {table}; "
                "nothing was changed"
            )
    missing = next(trigger_findings(connection), None)
    if missing:
        raise StoreDamaged(f"after the migration {missing.message}; nothing was changed")


def _row_counts(connection: Connection) -> dict[str, int]:
    present = set(inspect(connection).get_table_names())
    return {
        table: connection.exec_driver_sql(f'SELECT count(*) FROM "{table}"').scalar_one()
        for table in EVIDENCE_TABLES
        if table in present
    }
