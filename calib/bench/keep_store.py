"""Open, back up and upgrade the store itself."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

from calib import store as tables

if TYPE_CHECKING:
    from calib.store import Backup, Upgrade


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


def _address(url: str | Path | None) -> str | Path:
    return url if url is not None else tables.default_store_path()
