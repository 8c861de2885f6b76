"""Kill a program that works on a store at any moment, and say what is left; shared with tests/benchmarks."""

from __future__ import annotations

import gzip
import os
import random
import shutil
import signal
import subprocess
import sys
import time
from collections import Counter
from collections.abc import Iterator
from dataclasses import dataclass, field
from pathlib import Path

from calib.store import check_store, open_store, upgrade_store

HERE = Path(__file__).parent
ROOT = HERE.parents[1]
# Each deed is repeated in one process until it is killed; a line on its standard output says
# what was committed, after it was.
PROGRAM = """
import sys
sys.path[:0] = ["tests", "tests/store"]
from pathlib import Path
from small_laboratory import a_day, header_block, open_bench
from calib.bench.laboratory import Laboratory
from calib.errors import InputError

deed, path, mark = sys.argv[1], Path(sys.argv[2]), sys.argv[3]
bench = open_bench(path)
store = bench.store

def say(text):
    print(text, flush=True)

say("ready")
for n in range(1, 1000):
    if deed == "log":
        minute = (int(mark) * 37 + n) % 100000
        at = f"20{10 + minute // 50000:02d}-{1 + minute // 2400 % 12:02d}-{1 + minute // 1440 % 28:02d}"
        at += f"T{minute // 60 % 24:02d}:{minute % 60:02d}:{n % 60:02d}+02:00"
        record = bench.log(a_day(5.0 + n / 1000 + int(mark) / 1e5), f"k{mark}-{n}.csv", started=at)
        say(f"run {record.heading.id} {store.head()[0]}")
    elif deed == "refit":
        bench.laboratory.refit(1, reason=f"{mark}-{n}")
        say(f"done {store.head()[0]}")
    elif deed == "review":
        reviewer = Laboratory(store, "RS")
        try:
            reviewer.return_run(1, reason=f"{mark}-{n}")
        except InputError:  # the last one before it was killed returned it
            reviewer.approve(1, comment=f"{mark}-{n}")
        say(f"done {store.head()[0]}")
    elif deed == "backup":
        from calib.store import backup_store
        target = path.with_name(f"backup-{mark}-{n}.db")
        backup_store(store, target)
        say(f"backup {target.name}")
    else:
        from calib.store import upgrade_store
        old = path.with_name(f"old-{mark}-{n}.db")
        import shutil
        shutil.copy(path.with_name("old.db"), old)
        say(f"began {old.name}")
        upgrade_store(old)
        say(f"upgraded {old.name}")
"""
DEEDS = ("log", "refit", "review", "backup", "upgrade")


@dataclass
class Outcome:
    """What the kills came to."""

    kills: Counter[str] = field(default_factory=Counter)
    committed: Counter[str] = field(default_factory=Counter)
    lost: list[str] = field(default_factory=list)
    half: list[str] = field(default_factory=list)
    unsound: list[str] = field(default_factory=list)


def prepare(folder: Path, registered: Path) -> Path:
    """A store with one run and a reviewer, and one of the first schema."""
    from small_laboratory import a_day, open_bench

    from calib.bench.settings import set_roles

    path = folder / "lab.db"
    shutil.copy(registered, path)
    bench = open_bench(path)
    set_roles(bench.store, "RS", ("reviewer",), by="QM")
    bench.log(a_day())
    bench.laboratory.close()
    (folder / "old.db").write_bytes(gzip.decompress((HERE / "schemas" / "0001.db.gz").read_bytes()))
    return path


def kill_at_random(path: Path, deed: str, mark: int, longest: float, chance: random.Random) -> list[str]:
    """Start a program and kill it within ``longest`` seconds of its first word; what it said."""
    process = subprocess.Popen(
        [sys.executable, "-c", PROGRAM, deed, str(path), str(mark)],
        cwd=ROOT,
        env={**os.environ, "PYTHONPATH": str(ROOT)},
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
    )
    assert process.stdout is not None
    first = process.stdout.readline().strip()
    time.sleep(chance.uniform(0.0, longest))
    process.send_signal(signal.SIGKILL)
    rest, errors = process.communicate()
    if process.returncode != -signal.SIGKILL or first != "ready":
        raise AssertionError(f"{deed} was not killed but ended with {process.returncode}: {errors}")
    return [line for line in rest.splitlines() if line]


def examine(path: Path, deed: str, said: list[str], outcome: Outcome) -> None:
    """Open the store again: everything that was said to be done is there, and nothing is half."""
    outcome.kills[deed] += 1
    outcome.committed[deed] += sum(1 for line in said if not line.startswith("began"))
    with open_store(path, create=False) as store:
        check = check_store(store)
        if check.findings:
            outcome.unsound.append(f"after {deed}: {check.findings[0]}")
        with store.reading() as session:
            connection = session.connection()
            runs = set(connection.exec_driver_sql("SELECT id FROM run").scalars())
            for number in _half_runs(connection):
                outcome.half.append(f"run {number}")
        for line in said:
            word, *numbers = line.split()
            if word == "run" and int(numbers[0]) not in runs:
                outcome.lost.append(line)
            if word in ("run", "done") and int(numbers[-1]) > check.head_sequence:
                outcome.lost.append(line)
    for line in said:
        word, name = line.split()[0], line.split()[-1]
        if word == "backup":
            _examine_copy(path.with_name(name), outcome)
    for copy in (*path.parent.glob("backup-*.db"), *path.parent.glob("old-*")):
        if copy.name.startswith("old-") and copy.suffix == ".db" and "schema" not in copy.name:
            _examine_upgraded(copy, outcome)
        copy.unlink(missing_ok=True)
    for draft in path.parent.glob(".*.draft*"):
        draft.unlink()  # a killed program cannot take its draft away; it is never taken for a store


def _half_runs(connection: object) -> Iterator[int]:
    """Runs without readings, facts, or a curve with its verdict and standards."""
    query = """
        SELECT id FROM run WHERE id NOT IN (SELECT run_id FROM run_facts)
        OR id NOT IN (SELECT run_id FROM reading)
        OR (curve_id IS NULL AND id NOT IN (
            SELECT curve.run_id FROM curve JOIN verdict ON verdict.curve_id = curve.id
            JOIN curve_standard ON curve_standard.curve_id = curve.id))
    """
    yield from connection.exec_driver_sql(query).scalars()  # type: ignore[attr-defined]


def _examine_copy(path: Path, outcome: Outcome) -> None:
    if not path.exists():
        outcome.lost.append(path.name)
        return
    with open_store(path, create=False) as copy:
        if check_store(copy).findings:
            outcome.unsound.append(path.name)


def _examine_upgraded(path: Path, outcome: Outcome) -> None:
    """It has the old schema or the new one, whole: the upgrade can simply be asked for again."""
    upgrade_store(path)
    with open_store(path, create=False) as store:
        if check_store(store).findings:
            outcome.unsound.append(path.name)
        if store.head()[0] != _entries_of_old():
            outcome.lost.append(path.name)


def _entries_of_old() -> int:
    import json

    return int(json.loads((HERE / "schemas" / "0001.json").read_text())["sequence"])
