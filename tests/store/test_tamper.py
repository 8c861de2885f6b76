"""Random single changes with the triggers dropped are all found and named (full size: benchmarks/tamper.py)."""

import random
import shutil
from pathlib import Path

import pytest
from small_laboratory import a_day, open_bench, unknown
from tampering import KINDS, tamper_with

from calib.bench.amend_run import Change
from calib.store import check_store, open_store


@pytest.fixture(scope="module")
def worked(tmp_path_factory: pytest.TempPathFactory, registered_store: Path) -> Path:
    path = tmp_path_factory.mktemp("tamper") / "lab.db"
    shutil.copy(registered_store, path)
    bench = open_bench(path)
    bench.log(a_day())
    bench.quantify([unknown("U7", 7.0)])
    bench.laboratory.exclude(1, ["#3"], reason="a bubble")
    bench.laboratory.amend(1, Change(operator="ZZ"), reason="typo")
    bench.laboratory.close()
    return path


@pytest.mark.parametrize("seed", range(2))
@pytest.mark.parametrize("kind", KINDS)
def test_a_change_is_found_and_named(worked: Path, tmp_path: Path, kind: str, seed: int) -> None:
    chance = random.Random(f"{kind}{seed}")
    deed = None
    while deed is None:
        path = Path(shutil.copy(worked, tmp_path / "lab.db"))
        deed = tamper_with(path, kind, chance)
    with open_store(path, create=False) as store:
        found = [f for f in check_store(store).findings if f.code != "trigger-missing"]
    assert found, deed
    assert deed.places & {f.place for f in found}, (deed, found)
