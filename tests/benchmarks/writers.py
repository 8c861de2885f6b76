"""Eight processes log 200 runs each into one store at once: all there, in one valid chain, nobody told 'locked'.

Run: python tests/benchmarks/writers.py [8 200]
"""

import os
import subprocess
import sys
import tempfile
import time
from pathlib import Path

ROOT = Path(__file__).parents[2]
sys.path[:0] = [str(ROOT), str(ROOT / "tests")]
from small_laboratory import register

from calib.store import check_store, open_store

PROGRAM = """
import sys
from datetime import datetime, timedelta, timezone
sys.path.insert(0, "tests")
from pathlib import Path
from small_laboratory import a_day, open_bench
path, writer, runs = Path(sys.argv[1]), int(sys.argv[2]), int(sys.argv[3])
bench = open_bench(path)
start = datetime(2020, 1, 1, tzinfo=timezone.utc)
for n in range(runs):
    at = start + timedelta(minutes=writer * runs + n)
    bench.log(a_day(5.0 + writer / 10 + n / 1e4), f"w{writer}-{n}.csv", started=at.isoformat())
"""


def main(writers: int, runs: int) -> None:
    """Start the writers and count what is there."""
    with tempfile.TemporaryDirectory() as name:
        path = Path(name) / "lab.db"
        with open_store(path) as store:
            register(store, Path(name))
            before = store.head()[0]
        began = time.perf_counter()
        processes = [
            subprocess.Popen(
                [sys.executable, "-c", PROGRAM, str(path), str(writer), str(runs)],
                cwd=ROOT,
                env={**os.environ, "PYTHONPATH": str(ROOT)},
                stderr=subprocess.PIPE,
                text=True,
            )
            for writer in range(writers)
        ]
        errors = [process.communicate()[1] for process in processes]
        seconds = time.perf_counter() - began
        with open_store(path, create=False) as store:
            check = check_store(store)
            with store.reading() as session:
                held = session.connection().exec_driver_sql("SELECT count(*) FROM run").scalar_one()
                files = session.connection().exec_driver_sql("SELECT count(*) FROM original").scalar_one()
    print(f"{writers} writers x {runs} runs in {seconds:.0f} s")
    print(
        f"runs in the store: {held} of {writers * runs}; files {files}; chain entries {check.entries - before}"
    )
    print(f"findings of the check: {len(check.findings)}")
    print(f"writers that failed: {sum(p.returncode != 0 for p in processes)}; ", end="")
    print(f"'locked' told to {sum('lock' in e or 'let go' in e for e in errors)}")


if __name__ == "__main__":
    main(*(int(a) for a in sys.argv[1:3])) if len(sys.argv) > 2 else main(8, 200)
