"""Random single changes made in the file with triggers dropped: how many the check finds and names.

Run: python tests/benchmarks/tamper.py [200]
"""

import random
import shutil
import sys
import tempfile
from collections import Counter
from pathlib import Path

ROOT = Path(__file__).parents[2]
sys.path[:0] = [str(ROOT), str(ROOT / "tests"), str(ROOT / "tests" / "store")]
from small_laboratory import a_day, open_bench, register, unknown
from tampering import KINDS, tamper_with

from calib.bench.amend_run import Change
from calib.bench.settings import set_roles
from calib.store import check_store, open_store

NOT_DETECTABLE = (
    "the whole chain written anew from some entry on, with all digests, by someone who can write the file",
    "an older copy of the whole file put in its place",
    "(both are found by comparing a head kept elsewhere: store check --against, reports printed on paper)",
    "a false statement at the time it was written: another name in --by, a wrong clock, invented readings",
)


def worked_store(folder: Path) -> Path:
    """A store with corrections, a review and unknowns."""
    path = folder / "worked.db"
    with open_store(path) as store:
        register(store, folder)
        set_roles(store, "RS", ("reviewer",), by="QM")
    bench = open_bench(path)
    bench.log(a_day())
    bench.quantify([unknown("U7", 7.0)])
    bench.laboratory.exclude(1, ["#3"], reason="a bubble")
    bench.laboratory.amend(1, Change(operator="ZZ"), reason="typo")
    bench.log(a_day(5.1), "b.csv", started="2026-03-31T08:00:00+02:00")
    bench.laboratory.close()
    return path


def main(deeds: int) -> None:
    """Print found and named, by kind."""
    chance = random.Random(20260302)
    done, found, named = Counter(), Counter(), Counter()
    missed = []
    with tempfile.TemporaryDirectory() as name:
        worked = worked_store(Path(name))
        while sum(done.values()) < deeds:
            path = Path(shutil.copy(worked, Path(name) / "changed.db"))
            kind = list(KINDS)[sum(done.values()) % len(KINDS)]
            deed = tamper_with(path, kind, chance)
            if deed is None:
                continue
            with open_store(path, create=False) as store:
                findings = [f for f in check_store(store).findings if f.code != "trigger-missing"]
            done[kind] += 1
            found[kind] += bool(findings)
            hit = bool(deed.places & {f.place for f in findings})
            named[kind] += hit
            if not hit:
                missed.append((deed, findings[:2]))
    print(f"{'kind of change':16}{'made':>6}{'found':>7}{'named':>7}")
    for kind in KINDS:
        print(f"{kind:16}{done[kind]:6}{found[kind]:7}{named[kind]:7}")
    total = sum(done.values())
    print(f"{'all':16}{total:6}{sum(found.values()):7}{sum(named.values()):7}")
    for miss in missed:
        print("not named:", *miss)
    print("not detectable from the store alone:")
    for words in NOT_DETECTABLE:
        print(f"  {words}")


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 200)
