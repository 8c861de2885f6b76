"""A store that may not be written can be read; what is refused is said in words."""

import os
from pathlib import Path

import pytest
from made_rows import instrument

from calib.errors import StoreError
from calib.store import Store, check_store, files, open_store, session


@pytest.fixture
def read_only(filled: Store, monkeypatch: pytest.MonkeyPatch) -> Path:
    """As on a disk mounted for reading only (root may write whatever the permissions say)."""
    filled.close()
    monkeypatch.setattr(files, "may_write", lambda path: False)
    monkeypatch.setattr(session, "may_write", lambda path: False)
    return filled.path


def test_it_is_opened_and_checked_and_nothing_appears_beside_it(read_only: Path) -> None:
    with open_store(read_only, create=False) as store:
        assert check_store(store).sound
        assert sorted(p.name for p in read_only.parent.iterdir()) == [read_only.name]


def test_a_change_is_refused_in_words(read_only: Path) -> None:
    with (
        open_store(read_only, create=False) as store,
        pytest.raises(StoreError, match="may not be written here"),
        store.change("add", "KM") as held,
    ):
        held.add(instrument("PP-new"))


def test_what_is_not_in_the_file_yet_is_seen_too(filled: Store, monkeypatch: pytest.MonkeyPatch) -> None:
    # The store is open, so its last changes still wait in the file beside it.
    monkeypatch.setattr(files, "may_write", lambda path: False)
    monkeypatch.setattr(session, "may_write", lambda path: False)
    with open_store(filled.path, create=False) as store:
        assert store.head() == filled.head()


@pytest.mark.skipif(not hasattr(os, "geteuid") or os.geteuid() == 0, reason="root may write anything")
def test_a_lost_permission_is_said(filled: Store) -> None:
    filled.close()
    filled.path.chmod(0o000)
    with pytest.raises(StoreError, match=r"give yourself permission|cannot read the store"):
        open_store(filled.path, create=False)


def test_a_full_disk_is_said_and_nothing_is_lost(filled: Store) -> None:
    head = filled.head()
    with filled.engine.connect() as connection:
        pages = connection.exec_driver_sql("PRAGMA page_count").scalar_one()

    def add_many() -> None:
        with filled.change("add", "KM") as held:
            # SQLite reports a store that may not grow in the same way as a full disk (SQLITE_FULL).
            held.connection().exec_driver_sql(f"PRAGMA max_page_count = {pages}")
            held.add_all(instrument(f"PP-{n}") for n in range(2000))

    with pytest.raises(StoreError, match="the disk is full; nothing was written"):
        add_many()
    assert filled.head() == head
    assert check_store(filled).sound
