"""Backups: whole, checked, private, never over another file."""

import stat
from collections.abc import Callable
from pathlib import Path

import pytest
from made_rows import instrument

from calib.errors import StoreError
from calib.store import Store, backup_store, check_store, open_store


def test_a_backup_is_a_sound_store_with_the_same_head(filled: Store, tmp_path: Path) -> None:
    backup = backup_store(filled, tmp_path / "copy.db")
    assert backup.check.sound
    assert (backup.check.head_sequence, backup.check.head_hash) == filled.head()
    assert stat.S_IMODE(backup.path.stat().st_mode) == 0o600
    assert not list(tmp_path.glob(".*"))
    assert not list(tmp_path.glob("copy.db-*"))


def test_the_chain_goes_on_in_a_restored_backup(filled: Store, tmp_path: Path) -> None:
    backup = backup_store(filled, tmp_path / "copy.db")
    with open_store(backup.path, create=False) as restored:
        with restored.change("add", "KM") as session:
            session.add(instrument("PP-new"))
        check = check_store(restored)
    assert check.sound
    assert check.entries == 3


def test_a_backup_holds_what_is_not_yet_in_the_main_file(filled: Store, tmp_path: Path) -> None:
    with filled.change("add", "KM") as session:
        session.add(instrument("PP-late"))
    assert backup_store(filled, tmp_path / "copy.db").check.entries == 3


def test_a_file_is_never_overwritten(filled: Store, tmp_path: Path) -> None:
    other = tmp_path / "copy.db"
    other.write_text("mine")
    with pytest.raises(StoreError, match="never overwritten; name a new one"):
        backup_store(filled, other)
    assert other.read_text() == "mine"


def test_a_missing_folder_is_said(filled: Store, tmp_path: Path) -> None:
    with pytest.raises(StoreError, match="name a file in a folder that exists"):
        backup_store(filled, tmp_path / "no" / "copy.db")


def test_damage_of_the_store_is_found_in_the_backup(
    filled: Store, tamper: Callable[..., None], tmp_path: Path
) -> None:
    tamper("DROP TRIGGER reading_no_update", "UPDATE reading SET response = 9.0 WHERE id = 2")
    found = backup_store(filled, tmp_path / "copy.db").check.findings
    assert ("row-changed", "reading 2") in {(finding.code, finding.place) for finding in found}
