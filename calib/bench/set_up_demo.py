"""The fictional laboratory: registered and its season logged, in steps that can be resumed."""

from __future__ import annotations

import tomllib
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from calib import store as tables
from calib.bench.correct_run import exclude_readings
from calib.bench.log_run import evaluate_plan, log_plan
from calib.bench.plan_run import LogOptions, plan_file
from calib.bench.register import (
    LotRecord,
    add_event,
    add_instrument,
    add_lot,
    add_method,
    list_events,
    list_instruments,
    list_lots,
    list_methods,
)
from calib.bench.settings import list_people, set_roles
from calib.bench.show_run import list_runs, show_run
from calib.errors import DuplicateFile
from calib.shipped import shipped

KEEPER = "season import"

Progress = Callable[[int, int, str], None]


@dataclass(frozen=True, slots=True)
class DemoSeason:
    """What logging the season came to.

    Attributes
    ----------
    logged : int
        Files logged now.
    present : int
        Files that were in the store before.
    refused : tuple of (file, message)
        Files that were refused.
    rejected : tuple of (file, reasons)
        Runs whose curve was rejected, with the failing criteria.
    corrected : tuple of (file, decision)
        Runs with readings excluded afterwards by a person, and their verdict then.
    today : tuple of int
        Runs of the last day.
    """

    laboratory: str
    logged: int
    present: int
    refused: tuple[tuple[str, str], ...]
    rejected: tuple[tuple[str, str], ...]
    corrected: tuple[tuple[str, str], ...]
    today: tuple[int, ...]


def set_up_demo(store: tables.Store, progress: Progress) -> DemoSeason:
    """Register the fictional laboratory and log its season file by file.

    What is in the store already stays as it is, so an interrupted demo goes on.
    """
    folder = shipped("sample_runs")
    laboratory = tomllib.loads((folder / "laboratory.toml").read_text(encoding="utf-8"))
    _register(store, folder, laboratory)
    files = sorted((folder / "season").rglob("*.*"), key=_order_of_measurement)
    known = {line.file: line.id for line in list_runs(store)}
    logged = present = 0
    refused: list[tuple[str, str]] = []
    rejected: list[tuple[str, str]] = []
    corrected: list[tuple[str, str]] = []
    for done, file in enumerate(files):
        progress(done, len(files), file.name)
        if file.name in known:
            present += 1
            corrected.extend(_exclude(store, file.name, known[file.name], laboratory))
            continue
        try:
            records = log_plan(store, evaluate_plan(plan_file(store, file, LogOptions(by=KEEPER))))
        except DuplicateFile as refusal:
            refused.append((file.name, str(refusal)))
            continue
        logged += 1
        rejected.extend(
            (file.name, _first_reason(r.evaluation.verdict.reasons))
            for r in records
            if not r.evaluation.verdict.accepted
        )
        corrected.extend(_exclude(store, file.name, records[0].heading.id or 0, laboratory))
    progress(len(files), len(files), "")
    today = laboratory["today"].isoformat()
    lines = list_runs(store)
    return DemoSeason(
        laboratory["name"],
        logged,
        present,
        tuple(refused),
        tuple(rejected),
        tuple(corrected),
        tuple(line.id for line in lines if line.at.date().isoformat() == today),
    )


def _order_of_measurement(file: Path) -> tuple[str, str]:
    """Files in the order of their day; the name holds instrument and day."""
    return file.stem.split("_")[1], file.name


def _first_reason(reasons: tuple[str, ...]) -> str:
    more = f" (and {len(reasons) - 1} more)" if len(reasons) > 1 else ""
    return f"{reasons[0]}{more}" if reasons else ""


def _register(store: tables.Store, folder: Path, laboratory: Mapping[str, Any]) -> None:
    known = {p.name for p in list_people(store)}
    for person in laboratory["person"]:
        if person["name"] not in known:
            set_roles(store, person["name"], tuple(person["roles"]), by=KEEPER)
    there = {i.name for i in list_instruments(store)}
    for i in laboratory["instrument"]:
        if i["name"] not in there:
            add_instrument(
                store,
                i["name"],
                kind=i["kind"],
                serial=i["serial"],
                location=i["location"],
                response_ceiling=i.get("response_ceiling"),
                utc_offset_minutes=i["utc_offset_minutes"],
                by=KEEPER,
            )
    lots = {lot.name for lot in list_lots(store)}
    for lot in laboratory["standard_lot"]:
        if lot["name"] not in lots:
            add_lot(store, LotRecord(**{k: lot.get(k) for k in LotRecord.__slots__}), by=KEEPER)
    methods = {m.name for m in list_methods(store)}
    for file in sorted((folder / "methods").glob("*.toml")):
        if file.stem not in methods:
            add_method(store, file, by=KEEPER)
    events = {(e.instrument, e.what) for e in list_events(store)}
    for e in laboratory["event"]:
        if (e["instrument"], e["what"]) not in events:
            add_event(store, e["instrument"], at=e["at"], kind=e["kind"], what=e["what"], by=e["by"])


def _exclude(
    store: tables.Store, name: str, number: int, laboratory: Mapping[str, Any]
) -> Iterator[tuple[str, str]]:
    """Exclusions a person of the laboratory decided on with an assignable cause.

    A run that was corrected since it was logged is left as it is.
    """
    for exclusion in laboratory.get("exclusion", []):
        if exclusion["file"] == name and not show_run(store, number).curves_before:
            record = exclude_readings(
                store,
                number,
                exclusion["readings"],
                reason=exclusion["reason"],
                reason_class="assignable cause",
                by=exclusion["by"],
            )
            yield name, record.evaluation.verdict.decision
