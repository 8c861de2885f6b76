"""`calib replay` over years of history: runs a second, and where the time goes.

The store is made by a seeded generator through the same use cases as `calib log`, one file a
run: 8 levels in duplicate, two checks, and ten unknowns in duplicate on a 4PL. The replay is
under a candidate with a tighter limit and another noise model, so that every run is compared.
Run: python tests/benchmarks/replay_speed.py [RUNS] [STORE]   (a STORE that exists is used again)
"""

import os

for variable in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ[variable] = "1"

import sys
import tempfile
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from datetime import UTC, datetime, timedelta
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parents[1]))

from small_laboratory import Line, header_block

from calib.bench import evaluate_many, replay
from calib.bench.laboratory import Laboratory
from calib.bench.register import add_instrument, add_method
from calib.store import Store, open_store

ROUNDS = 3
METHOD = """name = "logistic-a"
analyte = "alpha"
concentration_unit = "mg/L"
response_unit = "mV"
model = "4PL"
noise = "{noise}"
reference_concentrations = [2.0, 8.0, 30.0]

[acceptance]
preset = "plain"
relative_error = {limit}

[curve]
valid_for = "24 h"
"""
LEVELS = 3.0 ** np.arange(-2, 6)
TRUTH = (5.0, 250.0, 12.0, 1.1)
FIRST_DAY = datetime(2020, 1, 1, 6, tzinfo=UTC)
# Parts of the replay by the functions whose time they are; the rest is comparing.
PARTS = (
    ("reading", replay, ("archived_runs", "measured_of_runs", "curves_in_force", "reported_in_force")),
    ("fitting", evaluate_many, ("_curves",)),
    ("judging and quantifying", evaluate_many, ("settle",)),
    ("working ranges", replay, ("working_range",)),
)


def made_store(path: Path, runs: int) -> None:
    """Log seeded runs one after the other, as a laboratory would."""
    random = np.random.default_rng(2026)
    later = FIRST_DAY + timedelta(hours=runs)
    with open_store(path, now=lambda: later) as store, tempfile.TemporaryDirectory() as folder:
        for instrument in ("LX-1", "LX-2"):
            add_instrument(
                store,
                instrument,
                kind="line photometer",
                serial=instrument,
                location="Room 1",
                response_ceiling=None,
                utc_offset_minutes=0,
                by="KM",
            )
        method = Path(folder) / "logistic-a.toml"
        method.write_text(METHOD.format(noise="uniform", limit=0.3), encoding="utf-8")
        add_method(store, method, by="KM")
        laboratory = Laboratory(store, "KM")
        for number in range(runs):
            file = Path(folder) / f"run-{number}.csv"
            file.write_text(run_file(number, random), encoding="utf-8")
            laboratory.log(file)
            file.unlink()


def run_file(number: int, random: np.random.Generator) -> str:
    """One run as a file; the curve of each day is a little off the true one."""
    p = np.array(TRUTH) * np.exp(0.03 * random.standard_normal(4))

    def line(sample: str, role: str, content: float, nominal: bool) -> Line:
        mean = p[1] + (p[0] - p[1]) / (1.0 + (content / p[2]) ** p[3])
        response = round(float(mean + 2.0 * random.standard_normal()), 3)
        return Line(sample, role, content if nominal else None, response)

    standards = [line(f"S{i}", "standard", x, True) for i, x in enumerate(LEVELS) for _ in range(2)]
    checks = [line("Q", "check", 10.0, True) for _ in range(2)]
    contents = np.exp(random.uniform(np.log(1.0), np.log(60.0), 10))
    unknowns = [line(f"U{i}", "unknown", x, False) for i, x in enumerate(contents) for _ in range(2)]
    started = FIRST_DAY + timedelta(hours=number)
    instrument = "LX-1" if number % 2 else "LX-2"
    return header_block(
        [*standards, *checks, *unknowns],
        instrument=instrument,
        serial=instrument,
        started=started.isoformat(),
        method="logistic-a",
        standard_lot=None,
    )


@contextmanager
def timed_parts(seconds: dict[str, float]) -> Iterator[None]:
    """Add up the time of the functions of each part while this holds."""
    originals = [(module, name, getattr(module, name)) for _, module, names in PARTS for name in names]
    for part, module, names in PARTS:
        for name in names:
            setattr(module, name, timed(getattr(module, name), part, seconds))
    try:
        yield
    finally:
        for module, name, original in originals:
            setattr(module, name, original)


def timed(function: Callable[..., object], part: str, seconds: dict[str, float]) -> Callable[..., object]:
    """The function, its time added to a part."""

    def run(*arguments: object, **named: object) -> object:
        began = time.perf_counter()
        try:
            return function(*arguments, **named)
        finally:
            seconds[part] = seconds.get(part, 0.0) + time.perf_counter() - began

    return run


def replayed(store: Store, file: Path) -> tuple[replay.Replay, float, dict[str, float]]:
    """Result, seconds and their split, median of some rounds."""
    every: list[tuple[float, dict[str, float]]] = []
    for _ in range(ROUNDS):
        parts: dict[str, float] = {}
        began = time.perf_counter()
        with timed_parts(parts):
            found = replay.replay_runs(store, replay.ReplayRequest(file=file))
        every.append((time.perf_counter() - began, parts))
    total, parts = sorted(every, key=lambda one: one[0])[ROUNDS // 2]
    return found, total, parts


def main() -> None:
    """Print the table."""
    runs = int(sys.argv[1]) if len(sys.argv) > 1 else 10_000
    with tempfile.TemporaryDirectory() as folder:
        path = Path(sys.argv[2]) if len(sys.argv) > 2 else Path(folder) / "history.db"
        if not path.exists():
            began = time.perf_counter()
            made_store(path, runs)
            spent = time.perf_counter() - began
            print(f"made: {runs} runs in {spent:.0f} s, {1e3 * spent / runs:.1f} ms a run", flush=True)
        candidate = Path(folder) / "candidate.toml"
        candidate.write_text(METHOD.format(noise="relative", limit=0.15), encoding="utf-8")
        with open_store(path) as store:
            found, total, parts = replayed(store, candidate)
    print(f"replayed: {found.runs} runs in {total:.2f} s, {found.runs / total:.0f} runs a second")
    print(f"changed: {len(found.changed)} runs, {found.samples} samples compared")
    parts["the rest, comparing"] = total - sum(parts.values())
    for part, seconds in parts.items():
        print(f"{part:26}{seconds:8.2f} s{100 * seconds / total:6.1f} %")


if __name__ == "__main__":
    main()
