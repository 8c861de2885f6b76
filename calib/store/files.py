"""Files of the store: opened where they are, put in place whole, private, never over another one."""

import errno
import os
import sqlite3
import tempfile
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

_NO_LINKS = {errno.EPERM, errno.ENOTSUP, errno.EOPNOTSUPP, errno.ENOSYS}


def connect_file(path: Path, busy_seconds: float = 30.0) -> sqlite3.Connection:
    """Connect to an SQLite file that is there; a missing one is an error, not a new empty file."""
    address = f"{path.absolute().as_uri()}?mode=rw"
    return sqlite3.connect(address, uri=True, timeout=busy_seconds, check_same_thread=False)


@contextmanager
def new_file(path: Path) -> Iterator[Path]:
    """Make a file by way of a draft beside it, which takes its place when the block ends well.

    Yields
    ------
    Path
        The draft: empty, private to the user. A crash leaves no file or a whole one.

    Raises
    ------
    FileExistsError
        If a file of that name is there in the end; it is left as it is.
    """
    handle, name = tempfile.mkstemp(prefix=f".{path.name}-", suffix=".draft", dir=path.parent)
    os.close(handle)
    draft = Path(name)
    try:
        yield draft
        _publish(draft, path)
    finally:
        for left in (draft, *(draft.with_name(draft.name + end) for end in ("-wal", "-shm", "-journal"))):
            left.unlink(missing_ok=True)


def _publish(draft: Path, path: Path) -> None:
    try:
        os.link(draft, path)
    except OSError as error:
        if error.errno not in _NO_LINKS:
            raise
        _rename_unless_there(draft, path)
    _sync_folder(path.parent)


def _rename_unless_there(draft: Path, path: Path) -> None:
    # For disks without hard links, such as memory sticks: an instant is left between look and rename.
    if path.exists():
        raise FileExistsError(errno.EEXIST, os.strerror(errno.EEXIST), str(path))
    draft.rename(path)


def _sync_folder(folder: Path) -> None:
    if os.name != "posix":
        return
    handle = os.open(folder, os.O_RDONLY)
    try:
        os.fsync(handle)
    finally:
        os.close(handle)
