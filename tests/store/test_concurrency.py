"""Many writers: every change is there, in one valid chain."""

import subprocess
import sys
from pathlib import Path

from sqlalchemy import func, select

from calib.store import Instrument, Store, check_store, open_store

WRITERS, CHANGES = 4, 15

PROGRAM = """
import sys
sys.path.insert(0, "tests/store")
from made_rows import instrument
from calib.store import open_store
with open_store(sys.argv[1]) as store:
    for number in range(int(sys.argv[3])):
        with store.change("add", sys.argv[2]) as session:
            session.add(instrument(f"{sys.argv[2]}-{number}"))
"""


def test_writers_that_create_and_change_one_store_at_once(path: Path) -> None:
    root = Path(__file__).parents[2]
    writers = [
        subprocess.Popen([sys.executable, "-c", PROGRAM, str(path), f"W{number}", str(CHANGES)], cwd=root)
        for number in range(WRITERS)
    ]
    assert [writer.wait() for writer in writers] == [0] * WRITERS
    with open_store(path, create=False) as store:
        check = check_store(store)
        with store.reading() as session:
            held = session.scalar(select(func.count()).select_from(Instrument))
    assert check.findings == ()
    assert held == check.entries == WRITERS * CHANGES
    assert [file.name for file in path.parent.iterdir()] == ["lab.db"]


DYING = """
import os, sys
sys.path.insert(0, "tests/store")
from made_rows import instrument
from calib.store import open_store
store = open_store(sys.argv[1])
with store.change("add", "KM") as session:
    session.add_all(instrument(f"D-{number}") for number in range(200))
    session.flush()
    os._exit(9)
"""


def test_a_program_that_dies_in_a_change_leaves_nothing_of_it(filled: Store) -> None:
    root = Path(__file__).parents[2]
    done = subprocess.run([sys.executable, "-c", DYING, str(filled.path)], cwd=root)
    assert done.returncode == 9
    check = check_store(filled)
    assert check.findings == ()
    assert (check.entries, check.rows) == (2, 22)
