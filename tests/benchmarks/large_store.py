"""A store with a million readings: check, backup and export against copying the file; does `log` grow?

Run: python tests/benchmarks/large_store.py [1000000]
"""

import shutil
import statistics
import sys
import tempfile
import time
from collections.abc import Callable
from datetime import UTC, datetime, timedelta
from pathlib import Path

ROOT = Path(__file__).parents[2]
sys.path[:0] = [str(ROOT), str(ROOT / "tests")]
from small_laboratory import Line, a_day, open_bench, register, signal

from calib.store import backup_store, check_store, export_store, import_store, open_store

START = datetime(2000, 1, 1, tzinfo=UTC)
AT_ONCE = 20  # runs whose logging is timed together
REPEATS = 3


def day(number: int, unknowns: int) -> list[Line]:
    """Standards, blank, check and so many unknowns in duplicate."""
    lines = [
        Line(f"U{number}-{n}", "unknown", None, signal(2.0 + 7.0 * n / unknowns)) for n in range(unknowns)
    ]
    return a_day(5.0 + number / 1e6, unknowns=[*lines, *lines])


def seconds(deed: Callable[[], object]) -> float:
    """Time of one deed."""
    began = time.perf_counter()
    deed()
    return time.perf_counter() - began


def main(readings: int) -> None:
    """Fill, then measure side by side in each round."""
    unknowns, per_run = 493, 1000
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        path = folder / "lab.db"
        with open_store(path) as store:
            register(store, folder)
        bench = open_bench(path)
        growth = []
        for number in range(readings // per_run):
            at = START + timedelta(hours=number)
            took = seconds(
                lambda n=number, at=at: bench.log(day(n, unknowns), f"{n}.csv", started=at.isoformat())
            )
            growth.append(took)
        runs, first, last = len(growth), growth[1 : 1 + AT_ONCE], growth[-AT_ONCE:]
        print(f"{runs} runs, {runs * per_run} readings, {path.stat().st_size / 1e6:.0f} MB")
        print(
            f"log of one run of {per_run} readings: median of the first {AT_ONCE} "
            f"{statistics.median(first):.2f} s, of the last {AT_ONCE} {statistics.median(last):.2f} s, "
            f"ratio {statistics.median(last) / statistics.median(first):.2f}"
        )
        bench.laboratory.close()
        store = open_store(path, create=False)

        def fresh(file: str) -> Path:
            target = folder / file
            target.unlink(missing_ok=True)
            return target

        deeds = {
            "copy of the file": lambda: shutil.copy(path, folder / "copy.db"),
            "check": lambda: check_store(store),
            "backup, checked": lambda: backup_store(store, fresh("backup.db")),
            "export": lambda: export_store(store, fresh("all.zip"), version="0"),
            "import, checked": lambda: import_store(folder / "all.zip", fresh("back.db")),
        }
        times = {what: [] for what in deeds}
        for _ in range(REPEATS):
            for what, deed in deeds.items():
                times[what].append(seconds(deed))
        copy = statistics.median(times["copy of the file"])
        for what, taken in times.items():
            median = statistics.median(taken)
            print(f"{what:18}{median:9.2f} s{median / copy:9.1f} x the copy")
        store.close()


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 1_000_000)
