"""Opening a store: created whole, refused in words, never changed when refused."""

import os
import shutil
import sqlite3
import stat
import subprocess
import sys
import tempfile
from collections.abc import Callable, Iterator
from contextlib import closing
from pathlib import Path

import pytest
from made_rows import instrument

from calib.errors import (
    NotAStore,
    NotFound,
    SchemaTooNew,
    SchemaTooOld,
    StoreDamaged,
    StoreError,
    StoreLocked,
)
from calib.store import Store, check_store, default_store_path, open_store, store_path
from calib.store.schema import REVISIONS

NOBODY = 65534


@pytest.fixture
def as_someone(monkeypatch: pytest.MonkeyPatch) -> Iterator[Path]:
    """A folder of a user whom file permissions bind (they do not bind root)."""
    folder = Path(tempfile.mkdtemp())
    root = os.geteuid() == 0
    if root:
        os.chown(folder, NOBODY, NOBODY)
        os.seteuid(NOBODY)
    try:
        yield folder
    finally:
        if root:
            os.seteuid(0)
        folder.chmod(0o700)
        shutil.rmtree(folder)


def test_a_new_store_is_private_and_whole(path: Path) -> None:
    with open_store(path) as store:
        assert check_store(store).findings == ()
    assert stat.S_IMODE(path.stat().st_mode) == 0o600
    assert [file.name for file in path.parent.iterdir()] == ["lab.db"]


@pytest.mark.parametrize("name", ["lab.db", "with space.db", "100%25?mode=memory#.db", "ü.db"])
def test_names_of_files_are_taken_as_they_are(tmp_path: Path, name: str) -> None:
    open_store(tmp_path / name).close()
    assert [file.name for file in tmp_path.iterdir()] == [name]


def test_an_address_and_a_path_mean_the_same(path: Path) -> None:
    assert store_path(f"sqlite:///{path}") == store_path(str(path)) == store_path(path) == path


@pytest.mark.parametrize(
    "address",
    ["postgresql://lab/calib", "sqlite://", "sqlite:///:memory:", "sqlite:///a.db?mode=ro", "what://", ""],
)
def test_other_addresses_are_refused_in_words(address: str) -> None:
    with pytest.raises(StoreError, match=r"sqlite:///FILE|name a file"):
        open_store(address)


def test_a_missing_store_is_not_found_where_it_may_not_be_made(path: Path) -> None:
    with pytest.raises(NotFound, match="check the name"):
        open_store(path, create=False)
    assert not path.exists()


def test_a_missing_folder_is_said(tmp_path: Path) -> None:
    with pytest.raises(StoreError, match="name a file in a folder that exists"):
        open_store(tmp_path / "no" / "lab.db")


def test_a_failure_while_creating_leaves_nothing(path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def full(_connection: object, _tables: object) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr("calib.store.triggers.create_triggers", full)
    with pytest.raises(StoreError, match="No space left on device; make room"):
        open_store(path)
    assert list(path.parent.iterdir()) == []


def test_who_comes_second_uses_the_store_of_the_first(path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    from calib.store import migrating

    migrate = migrating.migrate

    def slow(engine: object) -> None:
        monkeypatch.setattr(migrating, "migrate", migrate)
        with open_store(path) as first, first.change("add", "KM") as session:
            session.add(instrument())
        migrate(engine)  # type: ignore[arg-type]

    monkeypatch.setattr(migrating, "migrate", slow)
    with open_store(path) as second:
        assert second.head()[0] == 1


def test_disks_without_hard_links_do_too(path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def refuse(*_: object) -> None:
        raise PermissionError(1, "Operation not permitted")

    monkeypatch.setattr(os, "link", refuse)
    with open_store(path) as store:
        assert check_store(store).findings == ()
    assert [file.name for file in path.parent.iterdir()] == ["lab.db"]


def make_text(path: Path) -> None:
    path.write_text("sample,role\n")


def make_empty(path: Path) -> None:
    path.touch()


def make_foreign(path: Path) -> None:
    with closing(sqlite3.connect(path)) as connection:
        connection.execute("CREATE TABLE alembic_version (version_num)")


def make_torn(path: Path) -> None:
    path.write_bytes(b"SQLite format 3\x00" + bytes(range(200)))


@pytest.mark.parametrize("make", [make_text, make_empty, make_foreign, make_torn])
def test_what_is_no_store_is_refused_and_left_alone(path: Path, make: Callable[[Path], None]) -> None:
    make(path)
    before = path.read_bytes()
    with pytest.raises((NotAStore, StoreDamaged), match=r"lab\.db"):
        open_store(path)
    assert path.read_bytes() == before
    assert [file.name for file in path.parent.iterdir()] == ["lab.db"]


def test_a_folder_is_no_store(tmp_path: Path) -> None:
    with pytest.raises(NotAStore, match="is a folder"):
        open_store(tmp_path)


@pytest.mark.parametrize(
    ("found", "known", "kind", "words"),
    [
        ("9999", REVISIONS, SchemaTooNew, "install the newer calib"),
        (REVISIONS[-1], (*REVISIONS, "9999"), SchemaTooOld, "run calib store upgrade"),
    ],
)
def test_other_schemas_are_refused_and_left_alone(
    store: Store,
    tamper: Callable[..., None],
    monkeypatch: pytest.MonkeyPatch,
    found: str,
    known: tuple[str, ...],
    kind: type[StoreError],
    words: str,
) -> None:
    tamper(f"UPDATE alembic_version SET version_num = '{found}'")
    before = store.path.read_bytes()
    monkeypatch.setattr("calib.store.schema.REVISIONS", known)
    with pytest.raises(kind, match=words):
        open_store(store.path)
    assert store.path.read_bytes() == before


def test_a_store_without_version_is_damaged(store: Store, tamper: Callable[..., None]) -> None:
    tamper("DELETE FROM alembic_version")
    with pytest.raises(StoreDamaged, match="0 schema versions"):
        open_store(store.path)


def test_a_locked_store_says_so_in_one_line(store: Store) -> None:
    with open_store(store.path, busy_seconds=0.05) as waiting, store.change("add", "KM") as session:
        session.add(instrument())
        with pytest.raises(StoreLocked, match=r"another program holds it.*try again") as refused:
            waiting.change("add", "JT").__enter__()
        assert "\n" not in str(refused.value)


def test_readers_are_not_kept_out_by_a_writer(store: Store) -> None:
    with open_store(store.path, busy_seconds=0.05) as other, store.change("add", "KM") as session:
        session.add(instrument())
        session.flush()
        assert other.head()[0] == 0


def test_a_store_that_may_not_be_written_says_so(as_someone: Path) -> None:
    path = as_someone / "lab.db"
    open_store(path).close()
    path.chmod(0o400)
    with open_store(path) as store:
        assert store.head()[0] == 0
        with pytest.raises(StoreError, match="may not be written"), store.change("add", "KM") as session:
            session.add(instrument())


def test_a_folder_that_may_not_be_written_says_so(as_someone: Path) -> None:
    as_someone.chmod(0o500)
    with pytest.raises(StoreError, match="Permission denied; name a file in a folder"):
        open_store(as_someone / "lab.db")


def test_a_full_disk_undoes_the_change(store: Store) -> None:
    with store.engine.connect() as connection:
        connection.exec_driver_sql("PRAGMA max_page_count = 1")
    with pytest.raises(StoreError, match="the disk is full"), store.change("add", "KM") as session:
        session.add_all(instrument(f"PP-{number}", location="x" * 4000) for number in range(40))
    assert check_store(store).findings == ()


def test_the_default_place_is_in_the_data_folder_of_the_user(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr("platformdirs.user_data_path", lambda *_, **__: tmp_path / "data")
    assert default_store_path() == tmp_path / "data" / "calib.db"
    assert (tmp_path / "data").is_dir()


def test_opening_an_existing_store_imports_nothing_heavy(store: Store) -> None:
    program = (
        "import sys; from calib.store import open_store; s = open_store(sys.argv[1]); s.head(); s.close(); "
        "heavy = {'alembic', 'pandas', 'matplotlib', 'scipy', 'openpyxl', 'jinja2', 'rich', 'numpy'}; "
        "print(sorted(heavy & set(sys.modules)))"
    )
    root = Path(__file__).parents[2]
    done = subprocess.run(
        [sys.executable, "-c", program, str(store.path)], cwd=root, capture_output=True, text=True, check=True
    )
    assert done.stdout.strip() == "[]"
