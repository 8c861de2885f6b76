"""Try whether a backup can be gone back to: copied, opened, checked, every curve fitted again."""

from __future__ import annotations

import json
import tempfile
from dataclasses import dataclass
from pathlib import Path

from sqlalchemy import select

from calib import store as tables
from calib.bench.check_records import Progress, RecordCheck, check_records
from calib.store.heads import SCHEMA


@dataclass(frozen=True, slots=True)
class Restored:
    """What a backup is worth.

    Attributes
    ----------
    path : Path or None
        The store that was made from it; None for a trial, after which nothing is left.
    check : RecordCheck
        Of the copy, with every curve fitted again.
    of_this_store : bool or None
        Whether its chain is the beginning of the chain of the store in use; None without one.
    behind : int or None
        How many entries the store in use has beyond it.
    """

    path: Path | None
    check: RecordCheck
    of_this_store: bool | None
    behind: int | None

    @property
    def sound(self) -> bool:
        """Whether the backup can be gone back to."""
        return self.check.sound and self.of_this_store is not False


def restore_backup(
    backup: str | Path,
    to: str | Path | None,
    *,
    present: tables.Store | None,
    progress: Progress = lambda done, total: None,
) -> Restored:
    """Copy a backup to a new file, or to a passing one for a trial, and check the copy.

    Parameters
    ----------
    backup : str or Path
    to : str or Path, optional
        The new store, never over another file; left out, it is a trial.
    present : Store, optional
        The store in use, to tell whether the backup is one of it.

    Raises
    ------
    StoreError
        When it is no store, or cannot be copied.
    """
    from calib.store import backup_store

    with tables.open_store(Path(backup), create=False) as source:
        if to is not None:
            copy = backup_store(source, to).path
            return _tried(copy, present, progress, copy)
        with tempfile.TemporaryDirectory(prefix="calib-restore-") as folder:
            copy = backup_store(source, Path(folder) / "trial.db").path
            return _tried(copy, present, progress, None)


def _tried(copy: Path, present: tables.Store | None, progress: Progress, path: Path | None) -> Restored:
    with tables.open_store(copy, create=False) as store:
        check = check_records(store, all_curves=True, progress=progress)
    if present is None:
        return Restored(path, check, None, None)
    with present.reading() as session:
        held = session.scalar(
            select(tables.ChainEntry.hash).where(tables.ChainEntry.sequence == check.head_sequence)
        )
    same = check.head_sequence == 0 or held == check.head_hash
    return Restored(path, check, same, present.head()[0] - check.head_sequence if same else None)


def head_text(store: tables.Store) -> str:
    """The head of the record chain as a small file to keep where nobody can rewrite it."""
    sequence, head = store.head()
    now = store.now().isoformat()
    return json.dumps({"schema": SCHEMA, "sequence": sequence, "hash": head, "read": now}, indent=1) + "\n"
