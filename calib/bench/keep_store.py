"""Open, back up and upgrade the store itself."""

from __future__ import annotations

from collections.abc import Iterable
from pathlib import Path
from typing import TYPE_CHECKING

from calib import store as tables

if TYPE_CHECKING:
    from calib.bench.check_records import Progress
    from calib.store import Backup, Export, Import, Upgrade
    from calib.store.heads import KeptHead


def open_laboratory_store(
    url: str | Path | None, *, create: bool = False, busy_seconds: float = 30.0
) -> tables.Store:
    """Open the store at an address, or the one in the user's data folder.

    Raises
    ------
    StoreError
        When it is missing, no store, of another version, or locked.
    """
    return tables.open_store(_address(url), create=create, busy_seconds=busy_seconds)


def back_up(store: tables.Store, to: str | Path) -> Backup:
    """Copy the store while it is in use, and check the copy."""
    from calib.store import backup_store

    return backup_store(store, to)


def upgrade(url: str | Path | None) -> Upgrade:
    """Bring an older store to this version, after a backup beside it."""
    from calib.store import upgrade_store

    return upgrade_store(_address(url))


def export_archive(store: tables.Store, to: str | Path, progress: Progress) -> Export:
    """Write everything the store holds to an open archive."""
    from calib import __version__
    from calib.store import export_store

    return export_store(store, to, version=__version__, progress=progress)


def import_archive(archive: str | Path, to: str | Path | None, progress: Progress) -> Import:
    """Make a new store from an open archive."""
    from calib.store import import_store

    return import_store(archive, _address(to), progress=progress)


def kept_heads(written: Iterable[str]) -> tuple[KeptHead, ...]:
    """Heads of the record chain as people kept them: NUMBER:HASH, or a file of store head.

    Raises
    ------
    InputError
        For anything else.
    """
    from calib.store.heads import read_head

    return tuple(read_head(text) for text in written)


def _address(url: str | Path | None) -> str | Path:
    return url if url is not None else tables.default_store_path()
