"""What the database or the file system refused, in words."""

import errno
import sqlite3
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from sqlalchemy.exc import DBAPIError, StatementError

from calib.errors import CalibError, NotAStore, StoreDamaged, StoreError, StoreLocked

# Primary result codes of SQLite (https://www.sqlite.org/rescode.html): exception and what to say.
_REFUSALS: dict[int, tuple[type[StoreError], str]] = {
    sqlite3.SQLITE_BUSY: (
        StoreLocked,
        "another program holds it and did not let go in time; close that program or try again",
    ),
    sqlite3.SQLITE_LOCKED: (StoreLocked, "another step of this program still uses it; try again"),
    sqlite3.SQLITE_READONLY: (
        StoreError,
        "it may not be written here; give yourself write permission for the file and its folder, or copy it",
    ),
    sqlite3.SQLITE_PERM: (
        StoreError,
        "access was denied; give yourself permission for the file and its folder",
    ),
    sqlite3.SQLITE_CANTOPEN: (
        StoreError,
        "it cannot be opened; check that its folder exists and that you may write there",
    ),
    sqlite3.SQLITE_FULL: (StoreError, "the disk is full; nothing was written; make room and try again"),
    sqlite3.SQLITE_IOERR: (
        StoreError,
        "the disk failed while it was used; check the disk, then run calib store check",
    ),
    sqlite3.SQLITE_NOTADB: (NotAStore, "the file is no SQLite database; name a calib store"),
    sqlite3.SQLITE_CORRUPT: (StoreDamaged, "the file is damaged; go back to a backup, and keep this file"),
}

_REMEDIES = {
    errno.ENOSPC: "make room and try again",
    errno.EDQUOT: "make room and try again",
    errno.EEXIST: "a file is never overwritten; name a new one",
}


@contextmanager
def in_words(path: Path) -> Iterator[None]:
    """Turn what SQLAlchemy and SQLite raise into the exceptions of calib.

    Parameters
    ----------
    path : Path
        The store, named in the message.

    Raises
    ------
    StoreError
        Or one of its kinds, in one line. What is not about the store passes unchanged.
    """
    try:
        yield
    except StatementError as error:
        if isinstance(error.orig, CalibError):
            raise error.orig from None
        if isinstance(error, DBAPIError) and isinstance(error.orig, sqlite3.Error):
            raise _refusal(path, error.orig) or error from error
        raise
    except sqlite3.Error as error:
        raise _refusal(path, error) or error from error


@contextmanager
def files_in_words(deed: str, path: Path) -> Iterator[None]:
    """Turn what the file system refuses into a StoreError in one line.

    Parameters
    ----------
    deed : str
        What was being done, such as ``"create the store"``.
    path : Path
        The file it was done to.
    """
    try:
        yield
    except OSError as error:
        remedy = _REMEDIES.get(
            error.errno or 0, "name a file in a folder that exists and that you may write to"
        )
        raise StoreError(f"cannot {deed} {path}: {error.strerror or error}; {remedy}") from error


def _refusal(path: Path, error: sqlite3.Error) -> StoreError | None:
    code = getattr(error, "sqlite_errorcode", None)
    if code is None:
        return None
    primary = code & 0xFF
    if primary == sqlite3.SQLITE_CONSTRAINT:
        return StoreError(f"the store {path} refuses this change: {error}; nothing was written")
    if primary not in _REFUSALS:
        return None
    kind, words = _REFUSALS[primary]
    return kind(f"the store {path}: {words}")
