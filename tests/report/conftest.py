"""Records of a few sample runs, logged once into a temporary store."""

import tomllib
from pathlib import Path

import pytest

from calib.bench.correct_run import exclude_readings, void_run
from calib.bench.log_run import evaluate_plan, log_plan
from calib.bench.plan_run import LogOptions, plan_file
from calib.bench.records import RunRecord
from calib.bench.register import LotRecord, add_event, add_instrument, add_lot, add_method
from calib.bench.review_drift import DriftRecord, review_instrument
from calib.shipped import shipped
from calib.store import Store, open_store

RUNS = {
    "falling": "PP-2/PP-2_2026-03-02.csv",
    "rejected": "PP-2/PP-2_2026-03-18.csv",
    "rising": "GB-4/GB-4_2026-03-02.xlsx",
    "spilled": "GB-4/GB-4_2026-04-09.xlsx",
    "saturated": "EE-3/EE-3_2026-04-16.txt",
    "void": "OP-1/OP-1_2026-03-02.csv",
}
PROVISIONAL_RUNS = 12


@pytest.fixture(scope="session")
def store(tmp_path_factory: pytest.TempPathFactory) -> Store:
    store = open_store(tmp_path_factory.mktemp("report") / "lab.db")
    folder = shipped("sample_runs")
    laboratory = tomllib.loads((folder / "laboratory.toml").read_text(encoding="utf-8"))
    keys = ("name", "kind", "serial", "location", "utc_offset_minutes")
    for i in laboratory["instrument"]:
        known = {k: i[k] for k in keys} | {"response_ceiling": i.get("response_ceiling")}
        add_instrument(store, known.pop("name"), **known, by="KM")
    for lot in laboratory["standard_lot"]:
        add_lot(store, LotRecord(**{k: lot.get(k) for k in LotRecord.__slots__}), by="KM")
    for method in sorted((folder / "methods").glob("*.toml")):
        add_method(store, method, by="KM")
    for e in laboratory["event"]:
        add_event(store, e["instrument"], at=e["at"], kind=e["kind"], what=e["what"], by=e["by"])
    return store


def _log(store: Store, file: str | Path) -> RunRecord:
    path = shipped("sample_runs") / "season" / file
    return log_plan(store, evaluate_plan(plan_file(store, path, LogOptions(by="KM"))))[0]


@pytest.fixture(scope="session")
def records(store: Store) -> dict[str, RunRecord]:
    found = {name: _log(store, file) for name, file in RUNS.items()}
    number = {name: record.heading.id or 0 for name, record in found.items()}
    spilled = exclude_readings(store, number["spilled"], ["V-08"], reason="vessel spilled", by="RS")
    void = void_run(store, number["void"], reason="wrong cap on the probe", by="KM")
    return found | {"excluded": spilled, "void": void}


@pytest.fixture(scope="session")
def young_drift(store: Store, records: dict[str, RunRecord]) -> DriftRecord:
    """Few runs: no limits yet."""
    return review_instrument(store, "PP-2")


@pytest.fixture(scope="session")
def provisional_drift(store: Store, records: dict[str, RunRecord]) -> DriftRecord:
    """Enough runs for provisional limits, with one rejected and far off."""
    folder = shipped("sample_runs") / "season" / "EE-3"
    for file in sorted(folder.glob("*.txt"))[:PROVISIONAL_RUNS]:
        _log(store, file)
    return review_instrument(store, "EE-3")
