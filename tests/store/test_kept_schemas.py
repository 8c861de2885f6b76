"""A store of every earlier schema, kept with rows: upgraded it has every row, verdict and digit."""

import gzip
import json
from pathlib import Path

import pytest

import calib
from calib.bench.check_records import check_records
from calib.store import upgrade_store
from calib.store.schema import REVISIONS

FOLDER = Path(__file__).parent / "schemas"
KEPT = sorted(path.name.removesuffix(".db.gz") for path in FOLDER.glob("*.db.gz"))


def test_every_earlier_schema_is_kept() -> None:
    # Those between came and went within one day of work and were in no store of a user.
    assert set(KEPT) >= {"0001", "0002"}
    assert set(KEPT) <= set(REVISIONS)


@pytest.mark.parametrize("schema", KEPT)
def test_an_upgraded_store_has_every_row_verdict_and_digit(schema: str, tmp_path: Path) -> None:
    path = tmp_path / "lab.db"
    path.write_bytes(gzip.decompress((FOLDER / f"{schema}.db.gz").read_bytes()))
    told = json.loads((FOLDER / f"{schema}.json").read_text(encoding="utf-8"))
    upgrade = upgrade_store(path)
    assert (upgrade.before, upgrade.after) == (schema, REVISIONS[-1])
    assert upgrade.rows["reading"] > 50
    with calib.open_store(path, by="KM") as laboratory:
        assert laboratory.store.head() == (told["sequence"], told["head"])
        assert check_records(laboratory.store, all_curves=True).findings == ()
        for number, run in told["runs"].items():
            record = laboratory.run(int(number))
            assert record.evaluation.verdict.decision == run["decision"]
            assert record.evaluation.curve.parameters == run["parameters"]
            assert {q.sample: q.concentration for q in record.evaluation.quantities} == run["quantities"]
            assert record.heading.void_reason == run["void"]
        laboratory.refit(3, reason="goes on")
        assert laboratory.check().sound
