"""Keep a store of the present schema, with rows, for the upgrades of later days.

Run before a migration is added: python tests/store/keep_schema.py
"""

import gzip
import json
import sqlite3
import sys
import tempfile
from contextlib import closing
from pathlib import Path

sys.path[:0] = [str(Path(__file__).parents[1]), str(Path(__file__).parents[2])]
from small_laboratory import a_day, open_bench, register, unknown, with_response  # noqa: E402

from calib.bench.correct_run import Change  # noqa: E402
from calib.store import open_store  # noqa: E402
from calib.store.schema import newest_revision  # noqa: E402

FOLDER = Path(__file__).parent / "schemas"


def fill(path: Path) -> dict[str, object]:
    """Runs with every kind of correction; what the upgraded store must still tell of them."""
    with open_store(path) as store:
        register(store, path.parent)
    bench = open_bench(path)
    laboratory = bench.laboratory
    bench.log(with_response(a_day(), 3, 40.0), "a.csv")
    laboratory.exclude(1, ["#3"], reason="drop fell in")
    bench.quantify([unknown("U7", 7.0), unknown("U8", 14.0)])
    bench.log(a_day(5.1), "b.csv", started="2026-03-31T08:00:00+02:00")
    laboratory.amend(3, Change(operator="ZZ", samples=(("U1", "U9"),)), reason="wrong label")
    laboratory.refit(3, reason="again")
    bench.log(a_day(5.2), "c.csv", started="2026-03-30T08:00:00+02:00")
    laboratory.void(4, reason="wrong cup")
    told = {
        str(number): {
            "decision": record.evaluation.verdict.decision,
            "parameters": dict(record.evaluation.curve.parameters),
            "quantities": {q.sample: q.concentration for q in record.evaluation.quantities},
            "void": record.heading.void_reason,
        }
        for number in (1, 2, 3, 4)
        for record in [laboratory.run(number)]
    }
    sequence, head = bench.store.head()
    laboratory.close()
    return {"sequence": sequence, "head": head, "runs": told}


def main() -> None:
    """Write the store, compressed, and what it tells."""
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "lab.db"
        told = fill(path)
        with closing(sqlite3.connect(path)) as connection:
            connection.execute("PRAGMA wal_checkpoint(TRUNCATE)")
        name = FOLDER / newest_revision()
        name.with_suffix(".db.gz").write_bytes(gzip.compress(path.read_bytes(), mtime=0))
        name.with_suffix(".json").write_text(json.dumps(told, indent=1) + "\n", encoding="utf-8")


if __name__ == "__main__":
    main()
