import shutil
import sqlite3
from collections.abc import Callable, Iterator
from contextlib import closing
from pathlib import Path

import pytest
from made_rows import add_run

from calib.store import Store, open_store


@pytest.fixture
def path(tmp_path: Path) -> Path:
    return tmp_path / "lab.db"


@pytest.fixture(scope="session")
def new_store(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A new store, made once and copied for each test."""
    path = tmp_path_factory.mktemp("new") / "lab.db"
    open_store(path).close()
    return path


@pytest.fixture
def store(path: Path, new_store: Path) -> Iterator[Store]:
    shutil.copy(new_store, path)
    with open_store(path) as opened:
        yield opened


@pytest.fixture
def filled(store: Store) -> Store:
    with store.change("log run", "KM") as session:
        add_run(session, "a")
    with store.change("log run", "JT", "second plate") as session:
        add_run(session, "b")
    return store


@pytest.fixture
def tamper(path: Path) -> Callable[..., None]:
    """Do what a person with a general SQLite tool can do."""

    def run(*statements: str) -> None:
        with closing(sqlite3.connect(path)) as connection:
            for statement in statements:
                connection.execute(statement)
            connection.commit()

    return run
