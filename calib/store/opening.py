"""Open a store, or create it where there is none."""

from collections.abc import Callable
from contextlib import suppress
from datetime import datetime
from pathlib import Path

from sqlalchemy.engine import make_url
from sqlalchemy.exc import ArgumentError

from calib.errors import StoreError
from calib.store.files import new_file
from calib.store.refusals import files_in_words, in_words
from calib.store.schema import require_current
from calib.store.session import Store, connect_engine, local_now

BUSY_SECONDS = 30.0


def default_store_path() -> Path:
    """Name the store in the user's data folder, which is made if it is missing."""
    from platformdirs import user_data_path

    folder = user_data_path("calib", appauthor=False)
    with files_in_words("create the folder of the store", folder):
        folder.mkdir(mode=0o700, parents=True, exist_ok=True)
    return folder / "calib.db"


def store_path(url_or_path: str | Path) -> Path:
    """Find the file that an address or a path means.

    Raises
    ------
    StoreError
        If the address is of another database, or holds options.
    """
    if isinstance(url_or_path, Path) or "://" not in url_or_path:
        if not str(url_or_path).strip():
            raise StoreError("the name of the store is empty; name a file")
        return Path(url_or_path).expanduser()
    try:
        url = make_url(url_or_path)
    except ArgumentError:
        raise StoreError(f"{url_or_path} is no address of a store; write sqlite:///FILE or a path") from None
    if url.drivername != "sqlite":
        raise StoreError(f"a store in {url.drivername} is not possible yet; write sqlite:///FILE or a path")
    if url.database in (None, "", ":memory:") or url.query or url.host:
        raise StoreError(f"{url_or_path} names no file; write sqlite:///FILE, without options, or a path")
    return Path(str(url.database)).expanduser()


def open_store(
    url_or_path: str | Path,
    *,
    create: bool = True,
    busy_seconds: float = BUSY_SECONDS,
    now: Callable[[], datetime] = local_now,
) -> Store:
    """Open a store; a file that is not there yet is created whole, private to the user.

    Parameters
    ----------
    url_or_path : str or Path
        A path, or ``sqlite:///path``.
    create : bool
        Whether a missing store may be created.
    busy_seconds : float
        How long to wait, in seconds, for another program that writes.
    now : callable
        The clock for the record chain; gives an aware time.

    Returns
    -------
    Store
        To be closed with ``close`` or used in a ``with`` statement.

    Raises
    ------
    NotFound
        If there is no such file and ``create`` is false.
    NotAStore, SchemaTooOld, SchemaTooNew, StoreDamaged
        If the file is something else; it is left as it is.
    StoreError
        If the file cannot be made or opened.
    """
    path = store_path(url_or_path)
    if create and not path.exists():
        _create(path)
    require_current(path)
    return Store(path, connect_engine(path, busy_seconds), now)


def _create(path: Path) -> None:
    """Build a new store beside its place, so that a crash leaves none or a whole one."""
    from calib.store.migrating import migrate

    with (
        files_in_words("create the store", path),
        in_words(path),
        # Two programs may create at once: the second finds the store of the first and uses that.
        suppress(FileExistsError),
        new_file(path) as draft,
    ):
        engine = connect_engine(draft, BUSY_SECONDS)
        try:
            migrate(engine)
        finally:
            engine.dispose()
