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
    """Connect to an SQLite file that is there; a missing one is an error, not a new empty file.

    Where file or folder may not be written, such as on a disk that is mounted for reading
    only, the store is opened for reading. SQLite needs files beside a store in WAL mode even
    to read it (https://www.sqlite.org/wal.html#readonly), unless it is told that nothing
    changes it.
    """
    options = "mode=rw"
    if not may_write(path):
        options = "mode=ro" if _has_journal(path) else "mode=ro&immutable=1"
    address = f"{path.absolute().as_uri()}?{options}"
    return sqlite3.connect(address, uri=True, timeout=busy_seconds, check_same_thread=False)


def may_write(path: Path) -> bool:
    """Whether a store file and the folder around it can be written."""
    return os.access(path, os.W_OK) and os.access(path.absolute().parent, os.W_OK)


def _has_journal(path: Path) -> bool:
    """Whether changes wait beside the file that are not in it yet."""
    journal = path.with_name(f"{path.name}-wal")
    return journal.exists() and journal.stat().st_size > 0


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
