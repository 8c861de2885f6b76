"""Writes the season of the fictional Ostrel Lake Laboratory, the same bytes every time.

Run `python sample_runs/generate.py` to rewrite `season/`, `later/` and `truth.json`.
"""

from __future__ import annotations

import argparse
import json
import shutil
import tomllib
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from datetime import date, datetime, timedelta, timezone
from pathlib import Path
from typing import Any

from file_writers import STYLES, Response, SeasonRun
from laboratory_truth import (
    PLANS,
    Cup,
    Plan,
    RandomState,
    afternoon_cups,
    afternoon_seed,
    calibration_cups,
    measure,
    random_state,
    seed_of,
    true_parameters,
    unknown_cups,
)
from planted_faults import FAULTS, Fault

HERE = Path(__file__).parent
ORDINARY = Fault("", date.min, "", "nothing out of the ordinary", "accepted", "accepted")
START_TIMES = {"PP-2": (8, 12), "OP-1": (8, 20), "EE-3": (8, 31), "GB-4": (9, 5)}
OPERATORS = ("KM", "JT", "RS")
OVERFLOW_FROM = 1.15  # times the ceiling; a reading between the ceiling and this is written as the ceiling


@dataclass(frozen=True, slots=True)
class SeasonFile:
    """One file: its place, its bytes, and the truth behind it."""

    place: str
    content: bytes
    truth: Mapping[str, Any]


def working_days(laboratory: Mapping[str, Any]) -> list[date]:
    first, last = laboratory["first_day"], laboratory["today"]
    days = [first + timedelta(days=index) for index in range((last - first).days + 1)]
    return [day for day in days if day.weekday() < 5 and day not in laboratory["closed"]]


def fault_of(instrument: str, day: date) -> Fault:
    found = [fault for fault in FAULTS if (fault.instrument, fault.day) == (instrument, day)]
    return found[0] if found else ORDINARY


def lot_of(laboratory: Mapping[str, Any], instrument: str, day: date) -> Mapping[str, Any]:
    """The lot of this instrument opened last."""
    lots = [lot for lot in laboratory["standard_lot"] if lot["instrument"] == instrument]
    return max((lot for lot in lots if lot["in_use_from"] <= day), key=lambda lot: lot["in_use_from"])


def started_at(instrument: Mapping[str, Any], day: date, random: RandomState) -> datetime:
    hour, minute = START_TIMES[instrument["name"]]
    offset = timezone(timedelta(minutes=instrument["utc_offset_minutes"]))
    return datetime(day.year, day.month, day.day, hour, minute, tzinfo=offset) + timedelta(
        minutes=int(12 * random.random_sample())
    )


def as_read(response: float, ceiling: float | None) -> Response:
    if ceiling is None or response < ceiling:
        return response
    return "OVRFLW" if response > OVERFLOW_FROM * ceiling else ceiling


def read_cups(
    plan: Plan, cups: list[Cup], parameters: Mapping[str, float], random: RandomState, fault: Fault
) -> list[float]:
    deviates = [fault.noise_factor * random.standard_normal() for _ in cups]
    return [
        fault.gain * measure(plan, cup.content, parameters, deviate)
        for cup, deviate in zip(cups, deviates, strict=True)
    ]


def unknowns_truth(cups: tuple[Cup, ...]) -> list[dict[str, Any]]:
    """The concentration of each sample as it came, so the content of the cup times the dilution."""
    found = {(cup.sample, cup.dilution): cup for cup in cups if cup.role == "unknown"}
    return [
        {
            "sample": sample,
            "dilution": dilution,
            "concentration": float(f"{cup.content * dilution:.6g}"),
        }
        for (sample, dilution), cup in found.items()
    ]


def season_file(laboratory: Mapping[str, Any], instrument: Mapping[str, Any], day: date) -> SeasonFile:
    """Simulate one instrument's day and write it as that instrument would."""
    name, fault = instrument["name"], fault_of(instrument["name"], day)
    plan, lot = PLANS[name], lot_of(laboratory, name, day)
    random = random_state(seed_of(plan, day))
    started = started_at(instrument, day, random)
    operator = OPERATORS[int(3 * random.random_sample())]
    parameters = true_parameters(plan, day, random)
    samples = unknown_cups(plan, day, laboratory["today"], random)
    cups = (*calibration_cups(plan, new_lot=lot["in_use_from"] == day), *samples)
    measured = read_cups(plan, fault.change(list(cups)), parameters, random, fault)
    responses = responses_of(measured, instrument.get("response_ceiling"), fault)
    run = SeasonRun(
        name, instrument["serial"], instrument["method"], started, operator, lot["name"], cups, responses
    )
    style = STYLES[name, fault.layout]
    place = f"season/{name}/{name}_{day.isoformat()}{style.suffix}"
    return SeasonFile(place, style.write(run), truth_of(place, run, parameters, fault))


def responses_of(measured: list[float], ceiling: float | None, fault: Fault) -> tuple[Response, ...]:
    read = [as_read(response, ceiling) for response in measured]
    return tuple("ERR" if at == fault.unread else response for at, response in enumerate(read))


def truth_of(place: str, run: SeasonRun, parameters: Mapping[str, float], fault: Fault) -> dict[str, Any]:
    plan, day = PLANS[run.instrument], run.started.date()
    return {
        "file": place,
        "instrument": run.instrument,
        "method": run.method,
        "day": day.isoformat(),
        "lot": run.lot,
        "seed": seed_of(plan, day),
        "parameters": parameters,
        "noise": {"model": plan.noise, "sd": plan.noise_sd * fault.noise_factor},
        "steps": [step.what for step in plan.steps if step.day == day],
        "fault": fault.label or None,
        "what": fault.what,
        "expected": fault.expected,
        "decision": fault.decision,
        "fails": fault.fails,
        "unknowns": unknowns_truth(run.cups),
    }


def second_upload(first: SeasonFile) -> SeasonFile:
    """The same bytes under another name."""
    place = Path(first.place)
    again = place.with_name(f"{place.stem}_again{place.suffix}").as_posix()
    truth = {
        **first.truth,
        "file": again,
        "expected": f"refused: the same bytes as {place.name}, already logged",
        "decision": "refused",
    }
    return SeasonFile(again, first.content, truth)


def season(laboratory: Mapping[str, Any]) -> Iterator[SeasonFile]:
    """Every file, in the order the laboratory would log them."""
    for day in working_days(laboratory):
        for instrument in laboratory["instrument"]:
            file = season_file(laboratory, instrument, day)
            yield file
            if fault_of(instrument["name"], day).copied:
                yield second_upload(file)


def afternoon_file(laboratory: Mapping[str, Any]) -> SeasonFile:
    """Samples that came on the last afternoon, read on the electrode without standards of their own."""
    instrument = next(one for one in laboratory["instrument"] if one["name"] == "EE-3")
    day, plan = laboratory["today"], PLANS["EE-3"]
    morning = random_state(seed_of(plan, day))
    started = started_at(instrument, day, morning).replace(hour=15, minute=10)
    morning.random_sample()  # the operator of the morning
    parameters = true_parameters(plan, day, morning)
    random = random_state(afternoon_seed(plan, day))
    cups = afternoon_cups(plan, day, random)
    measured = read_cups(plan, list(cups), parameters, random, ORDINARY)
    lot = lot_of(laboratory, "EE-3", day)
    run = SeasonRun(
        "EE-3", instrument["serial"], instrument["method"], started, "RS", lot["name"], cups, tuple(measured)
    )
    place = f"later/EE-3_{day.isoformat()}_afternoon.txt"
    truth = {**truth_of(place, run, parameters, ORDINARY), "seed": afternoon_seed(plan, day), "steps": []}
    left_out = ("fault", "expected", "decision", "fails")  # a file without standards is not judged
    return SeasonFile(
        place, STYLES["EE-3", None].write(run), {k: v for k, v in truth.items() if k not in left_out}
    )


def truth_text(laboratory: Mapping[str, Any], files: list[SeasonFile], later: SeasonFile) -> str:
    """JSON with one file a line, so that a difference shows the day it belongs to."""
    lines = ",\n".join(json.dumps(file.truth, ensure_ascii=False) for file in files)
    head = json.dumps(
        {
            "schema": 1,
            "laboratory": laboratory["name"],
            "note": "invented; the concentration of an unknown is that of the sample before dilution",
            "later": [later.truth],
        },
        ensure_ascii=False,
    )
    return f'{head[:-1]}, "files": [\n{lines}\n]}}\n'


def write_season(into: Path) -> int:
    """Rewrite `season/`, `later/` and `truth.json` below `into`; returns the number of files."""
    laboratory = tomllib.loads((HERE / "laboratory.toml").read_text(encoding="utf-8"))
    files, later = list(season(laboratory)), afternoon_file(laboratory)
    for folder in ("season", "later"):
        shutil.rmtree(into / folder, ignore_errors=True)
    for file in (*files, later):
        target = into / file.place
        target.parent.mkdir(parents=True, exist_ok=True)
        target.write_bytes(file.content)
    (into / "truth.json").write_bytes(truth_text(laboratory, files, later).encode())
    return len(files) + 1


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--into", type=Path, default=HERE, help="folder to write to (default: this one)")
    into = parser.parse_args().into
    print(f"{write_season(into)} files written")


if __name__ == "__main__":
    main()
