"""The version of a store's schema, found with a plain query and without Alembic."""

from contextlib import closing
from pathlib import Path

from calib.errors import NotAStore, NotFound, SchemaTooNew, SchemaTooOld, StoreDamaged
from calib.store.files import connect_file
from calib.store.refusals import files_in_words, in_words

# Every schema there has been, oldest first; the migrations of the same names lead from one to the next.
REVISIONS: tuple[str, ...] = (
    "0001",
    "0002",
    "0003",
    "0004",
    "0005",
    "0006",
    "0007",
    "0008",
    "0009",
    "0010",
)

_SQLITE_MAGIC = b"SQLite format 3\x00"


def newest_revision() -> str:
    """Give the schema this calib works with."""
    return REVISIONS[-1]


def read_revision(path: Path) -> str:
    """Read which schema a store file has, changing nothing.

    Parameters
    ----------
    path : Path
        The file.

    Returns
    -------
    str
        Name of the schema's revision.

    Raises
    ------
    NotFound
        If there is no such file.
    NotAStore
        If it is no SQLite database, or not one of calib.
    StoreDamaged
        If it is a calib store that has lost its schema version.
    """
    _require_sqlite(path)
    with in_words(path), closing(connect_file(path)) as connection:
        connection.execute("PRAGMA query_only = ON")
        tables = {
            name for (name,) in connection.execute("SELECT name FROM sqlite_master WHERE type = 'table'")
        }
        if not {"record_chain", "alembic_version"} <= tables:
            raise NotAStore(f"{path} is an SQLite database, but no calib store; name another file")
        versions = [version for (version,) in connection.execute("SELECT version_num FROM alembic_version")]
    if len(versions) != 1:
        raise StoreDamaged(
            f"the store {path} states {len(versions)} schema versions instead of one; use a backup"
        )
    return str(versions[0])


def require_current(path: Path) -> None:
    """Refuse a store file that this calib cannot work with.

    Raises
    ------
    SchemaTooOld, SchemaTooNew
        If the schema is another one; and what ``read_revision`` raises.
    """
    revision = read_revision(path)
    if revision == newest_revision():
        return
    if revision in REVISIONS:
        raise SchemaTooOld(
            f"the store {path} has schema {revision}, this calib needs {newest_revision()}; "
            "run calib store upgrade"
        )
    raise SchemaTooNew(
        f"the store {path} has schema {revision}, which a newer calib made; this one knows up to "
        f"{newest_revision()}: install the newer calib"
    )


def _require_sqlite(path: Path) -> None:
    if not path.exists():
        raise NotFound(
            f"there is no store {path}; check the name, or create it with calib instrument add or calib demo"
        )
    if path.is_dir():
        raise NotAStore(f"{path} is a folder; name the store file in it")
    with files_in_words("read the store", path), path.open("rb") as file:
        start = file.read(len(_SQLITE_MAGIC))
    if not start:
        raise NotAStore(f"{path} is empty and no calib store; remove it or name another file")
    if start != _SQLITE_MAGIC:
        raise NotAStore(f"{path} is no SQLite database; name a calib store")
