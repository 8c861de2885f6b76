"""SIGKILL at random moments of logging, refit, review, backup and upgrade: what is lost, what is half.

Run: python tests/benchmarks/kill.py [300]
"""

import random
import shutil
import sys
import tempfile
from pathlib import Path

ROOT = Path(__file__).parents[2]
sys.path[:0] = [str(ROOT), str(ROOT / "tests"), str(ROOT / "tests" / "store")]
from killing import DEEDS, Outcome, examine, kill_at_random, prepare
from small_laboratory import register

from calib.store import open_store

LONGEST = 1.5  # seconds after the first word of the program


def main(kills: int) -> None:
    """Kill so many times, in turn over the deeds, on a store that is renewed now and then."""
    chance, outcome = random.Random(20260301), Outcome()
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        with open_store(folder / "registered.db") as store:
            register(store, folder)
        for number in range(kills):
            if number % 50 == 0:
                work = folder / f"w{number}"
                work.mkdir()
                path = prepare(work, folder / "registered.db")
            deed = DEEDS[number % len(DEEDS)]
            said = kill_at_random(path, deed, number, LONGEST, chance)
            examine(path, deed, said, outcome)
            if number % 50 == 49:
                shutil.rmtree(work)
    print(f"{'killed while':14}{'kills':>7}{'committed before the kill':>28}")
    for deed in DEEDS:
        print(f"{deed:14}{outcome.kills[deed]:7}{outcome.committed[deed]:28}")
    for what, found in (
        ("lost", outcome.lost),
        ("half", outcome.half),
        ("chain not valid", outcome.unsound),
    ):
        print(f"{what}: {len(found)} {found[:5] or ''}")


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 300)
