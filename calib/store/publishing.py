"""Put a finished file in its place: whole, private, and never over another one."""

import errno
import os
import tempfile
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

_NO_LINKS = {errno.EPERM, errno.ENOTSUP, errno.EOPNOTSUPP, errno.ENOSYS}


@contextmanager
def draft_beside(path: Path) -> Iterator[Path]:
    """Make an empty file beside a path, private to the user; it is removed at the end."""
    handle, name = tempfile.mkstemp(prefix=f".{path.name}-", suffix=".draft", dir=path.parent)
    os.close(handle)
    draft = Path(name)
    try:
        yield draft
    finally:
        for left in (draft, *(draft.with_name(draft.name + end) for end in ("-wal", "-shm", "-journal"))):
            left.unlink(missing_ok=True)


def publish(draft: Path, path: Path) -> None:
    """Give a finished draft its name at one stroke.

    Raises
    ------
    FileExistsError
        If a file of that name is there already; it is left as it is.
    """
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
