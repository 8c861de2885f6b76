import shutil
from collections.abc import Iterator
from pathlib import Path

import pytest
from small_laboratory import Bench, open_bench, register

from calib.store import open_store


@pytest.fixture(scope="session")
def registered_store(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A store with instruments, methods and a lot but no run, made once and copied for each test."""
    folder = tmp_path_factory.mktemp("registered")
    with open_store(folder / "lab.db") as store:
        register(store, folder)
    return folder / "lab.db"


@pytest.fixture
def laboratory_path(tmp_path: Path, registered_store: Path) -> Path:
    return Path(shutil.copy(registered_store, tmp_path / "lab.db"))


@pytest.fixture
def bench(laboratory_path: Path) -> Iterator[Bench]:
    opened = open_bench(laboratory_path)
    yield opened
    opened.laboratory.close()
