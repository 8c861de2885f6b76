"""Copy a store while it is in use."""

import errno
import os
from contextlib import closing
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from sqlalchemy import Engine

from calib.store.check import StoreCheck, check_store
from calib.store.files import connect_file, new_file
from calib.store.opening import BUSY_SECONDS
from calib.store.refusals import files_in_words, in_words
from calib.store.session import Store, connect_engine


@dataclass(frozen=True, slots=True)
class Backup:
    """A finished copy and the check of it; findings are those of the store itself."""

    path: Path
    check: StoreCheck


def backup_store(store: Store, to: str | Path) -> Backup:
    """Copy a store to a new file, private to the user, and check the copy.

    Parameters
    ----------
    store : Store
        The store; others may go on using it.
    to : str or Path
        The new file; one that is there is never overwritten.

    Returns
    -------
    Backup
        The copy and what the check of it found.

    Raises
    ------
    StoreError
        If the file is there already or cannot be written.
    """
    target = Path(to).expanduser()
    with files_in_words("write the backup", target), in_words(store.path):
        if target.exists():
            raise FileExistsError(errno.EEXIST, os.strerror(errno.EEXIST), str(target))
        with new_file(target) as draft:
            copy_into(store.engine, draft)
            with Store(draft, connect_engine(draft, BUSY_SECONDS), store.now) as copy:
                check = check_store(copy)
    return Backup(target, check)


def copy_into(engine: Engine, draft: Path) -> None:
    """Copy a database into an empty file, in one state, without keeping writers out."""
    with closing(engine.raw_connection()) as source, closing(connect_file(draft)) as copy:
        driver: Any = source.driver_connection
        driver.backup(copy)
