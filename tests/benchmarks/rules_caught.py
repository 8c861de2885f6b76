"""How often a clean run is rejected under each preset, and how often each of eight planted faults is caught.

    .venv/bin/python tests/benchmarks/rules_caught.py [runs]

Every run holds what its preset asks for: blank, zero, standards in duplicate, first check, checks before, amid and
after the samples, controls in duplicate at three levels, a carry-over blank after the highest standard, and samples.
The scatter is relative, with the coefficient of variation named in the table, as a laboratory that chose the preset
would have it. All presets stand as they come, with nothing but a reporting limit at the lowest level and brackets
around the samples. 'caught' is a rejected curve, or a refused or flagged sample that the fault spoiled.
"""

from __future__ import annotations

import math
import sys
import tempfile
from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace
from datetime import UTC, datetime
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parents[1]))

from small_laboratory import METHOD, Line, header_block, signal, standards, unknown

from calib.bench.evaluate import evaluate
from calib.bench.laboratory import Laboratory
from calib.bench.method_definition import MethodDefinition, read_definition
from calib.bench.records import Evaluation, Measured
from calib.bench.register import add_instrument, add_method
from calib.errors import InputError
from calib.store import open_store

LEVELS = (1.0, 2.0, 5.0, 10.0, 25.0, 50.0, 80.0, 100.0)
TEXT = """name = "m"
analyte = "a"
concentration_unit = "mg/L"
response_unit = "mV"
model = "{model}"
noise = "relative"
[acceptance]
preset = "{preset}"
[results]
reporting_limit = "1 mg/L"
{checks}
"""


@dataclass(frozen=True)
class Bench:
    """How a laboratory that chose this preset measures: its model and its scatter."""

    preset: str
    model: str
    cv: float


BENCHES = (
    Bench("bioanalytical-chromatographic", "line", 0.04),
    Bench("bioanalytical-ligand-binding", "4PL", 0.03),
    Bench("environmental", "line", 0.06),
    Bench("metals-frequent-checks", "line", 0.015),
    Bench("drinking-water-checks", "line", 0.02),
    Bench("plain", "line", 0.04),
)


@dataclass(frozen=True)
class Truth:
    """What really happens in a run; the plain one is clean.

    ``strength`` is what the standards hold of their nominal value by level, ``gain`` what the instrument answers
    after the curve, ``ceiling`` the share of the highest level's response that is left, ``carried`` the share of
    the highest standard that stays for the next reading, ``scatter`` a factor on the coefficient of variation.
    """

    strength: Callable[[float], float] = lambda level: 1.0
    swapped: bool = False
    ceiling: float = 1.0
    carried: float = 0.0
    scatter: float = 1.0
    gain: float = 1.0


FAULTS = {
    "wrong lot: standards hold 70 %": Truth(strength=lambda level: 0.7),
    "levels 5 and 10 exchanged": Truth(swapped=True),
    "a dilution made twice, levels up to 10": Truth(strength=lambda level: 0.5 if level <= 10 else 1.0),
    "saturated top: 80 % of its response": Truth(ceiling=0.8),
    "carry-over: 1 % of the highest": Truth(carried=0.01),
    "noisy plate: scatter times 4": Truth(scatter=4.0),
    "shifted check: +25 % after the curve": Truth(gain=1.25),
}


def definition_of(bench: Bench) -> MethodDefinition:
    limits = read_definition(TEXT.format(model=bench.model, preset=bench.preset, checks="")).limits
    checks = "[checks]\nbracket = true\n" if "check_recovery" in limits else ""
    return read_definition(TEXT.format(model=bench.model, preset=bench.preset, checks=checks))


def answer(bench: Bench, x: float) -> float:
    """Response without scatter: a line with a small offset, or a falling competitive curve."""
    return 0.02 + 2.0 * x if bench.model == "line" else 0.05 + 1.95 / (1 + x / 10.0)


def measured(bench: Bench, truth: Truth, chance: np.random.Generator) -> list[Measured]:
    """One run in the order of measurement."""
    rows: list[Measured] = []

    def read(sample: str, role: str, nominal: float | None, x: float, gain: float = 1.0) -> None:
        noise = 1 + truth.scatter * bench.cv * chance.standard_normal()
        if role == "standard" and nominal == LEVELS[-1]:
            zero = answer(bench, 0.0)
            clean = zero + truth.ceiling * (answer(bench, x) - zero)
        else:
            clean = answer(bench, x)
        rows.append(
            Measured(len(rows) + 1, sample, role, nominal, gain * clean * noise, None, 1.0, None, None, False)
        )

    read("B", "blank", None, 0.0)
    read("Z", "zero", None, 0.0)
    holds = dict(zip(LEVELS, LEVELS, strict=True))
    if truth.swapped:
        holds[5.0], holds[10.0] = 10.0, 5.0
    for number, level in enumerate(LEVELS, start=1):
        for _ in range(2):
            read(f"S{number}", "standard", level, holds[level] * truth.strength(level))
    left = truth.carried * LEVELS[-1]
    read("CO", "carry-over", None, left)
    read("F", "first-check", 20.0, 20.0)
    read("Q1", "check", 20.0, 20.0, truth.gain)
    for sample, x in (("U1", 3.0), ("U2", 30.0), ("U3", 60.0)):
        read(sample, "unknown", None, x, truth.gain)
    read("Q2", "check", 20.0, 20.0, truth.gain)
    for control in (2.5, 40.0, 85.0):
        for _ in range(2):
            read(f"C{control:g}", "control", control, control, truth.gain)
    read("U4", "unknown", None, 15.0, truth.gain)
    read("Q3", "check", 20.0, 20.0, truth.gain)
    return rows


def caught(evaluation: Evaluation) -> bool:
    """Whether the curve was rejected or the samples that the fault spoiled were held back."""
    held = ("not-bracketed", "carry-over-risk", "replicate-spread")
    samples = [q for q in evaluation.quantities if q.role == "unknown"]
    return not evaluation.verdict.accepted or all(any(f in held for f in q.flags) for q in samples)


def rate(bench: Bench, truth: Truth, runs: int, seed: int) -> Iterator[Evaluation]:
    definition = definition_of(bench)
    chance = np.random.default_rng(seed)
    for _ in range(runs):
        yield evaluate(definition, measured(bench, truth, chance))


def expired(runs: int) -> tuple[int, int]:
    """Samples measured 25 h after the curve, or after an event without a check: how many were refused."""
    refused = asked = 0
    with tempfile.TemporaryDirectory() as folder:
        lab = Laboratory(
            open_store(Path(folder) / "lab.db", now=lambda: datetime(2026, 12, 31, tzinfo=UTC)), "KM"
        )
        add_instrument(
            lab.store,
            "LX-1",
            kind="x",
            serial="77",
            location="",
            response_ceiling=None,
            utc_offset_minutes=120,
            by="KM",
        )
        method = Path(folder) / "m.toml"
        method.write_text(METHOD.format(name="line-a", analyte="alpha"), encoding="utf-8")
        add_method(lab.store, method, by="KM")
        for day in range(1, runs + 1):
            rows = [*standards(), Line("Q", "check", 5.0, signal(5.0)), unknown("U", 3.0)]
            wobble = [replace(r, response=float(r.response) + 0.001 * day) for r in rows]
            for name, lines, started in (
                ("day.csv", wobble, f"2026-04-{day:02d}T08:00:00+02:00"),
                ("late.csv", [unknown("U", 3.0 + 0.01 * day)], f"2026-04-{day + 1:02d}T09:00:00+02:00"),
            ):
                path = Path(folder) / name
                path.write_text(header_block(lines, started=started, standard_lot=None), encoding="utf-8")
                if name == "day.csv":
                    lab.log(path)
                    continue
                asked += 1
                try:
                    lab.quantify(path)
                except InputError:
                    refused += 1
        lab.close()
    return refused, asked


def main(runs: int) -> None:
    print(f"{runs} runs a cell; percent of runs, standard error at most {50 / math.sqrt(runs):.1f} points\n")
    head = ["preset", "CV", "clean: rejected", "clean: warned"]
    names = [b.preset for b in BENCHES]
    print(f"{head[0]:32s}{head[1]:>6s}{head[2]:>18s}{head[3]:>16s}")
    for bench in BENCHES:
        found = list(rate(bench, Truth(), runs, 1))
        rejected = 100 * sum(not e.verdict.accepted for e in found) / runs
        warned = 100 * sum(bool(e.verdict.warnings) for e in found) / runs
        print(f"{bench.preset:32s}{100 * bench.cv:5.1f}%{rejected:17.1f}%{warned:15.1f}%")
    print(f"\n{'planted fault, caught':42s}" + "".join(f"{name[:14]:>16s}" for name in names))
    for fault, truth in FAULTS.items():
        shares = [100 * sum(caught(e) for e in rate(b, truth, runs, 2)) / runs for b in BENCHES]
        print(f"{fault:42s}" + "".join(f"{share:15.1f}%" for share in shares))
    refused, asked = expired(20)
    print(f"{'expired curve: samples 25 h later':42s}" + f"{100 * refused / asked:15.1f}%  (any preset)")


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 400)
