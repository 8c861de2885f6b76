"""How often a clean run of the fictional laboratory is rejected by accident, and how its intervals cover.

Every instrument of sample_runs as it is on its first day, simulated afresh and judged by the
program itself. Run: python tests/benchmarks/clean_runs.py [RUNS]
"""

import math
import sys
import tomllib
from collections import Counter
from datetime import date
from pathlib import Path

from numpy.random import RandomState

SAMPLES = Path(__file__).parents[2] / "sample_runs"
sys.path.insert(0, str(SAMPLES))

import laboratory_truth as truth

from calib import working_range
from calib.bench.evaluate import evaluate
from calib.bench.method_definition import read_definition
from calib.bench.records import Measured


def clean_run(plan: truth.Plan, seed: int) -> list[tuple[Measured, float]]:
    """Readings of one clean day with the true content of each cup."""
    random = RandomState(seed)
    parameters = truth.true_parameters(plan, date(2026, 3, 2), random)
    day, last = date(2026, 3, 2), date(2026, 5, 29)
    cups = [*truth.calibration_cups(plan, False), *truth.unknown_cups(plan, day, last, random)]
    readings = []
    for cup in cups:
        response = truth.measure(plan, cup.content, parameters, random.standard_normal())
        readings.append((as_measured(len(readings), cup, response), cup.content))
    return readings


def as_measured(key: int, cup: truth.Cup, response: float) -> Measured:
    """One reading as the program sees it."""
    return Measured(key, cup.sample, cup.role, cup.nominal, response, None, cup.dilution, None, None, False)


def main() -> None:
    """Print the table."""
    runs = int(sys.argv[1]) if len(sys.argv) > 1 else 500
    print(f"{runs} clean runs an instrument")
    print(
        f"{'method':20}{'rejected %':>12}{'coverage %':>12}{'± s.e.':>8}{'unknowns':>10}   criteria that failed"
    )
    laboratory = tomllib.loads((SAMPLES / "laboratory.toml").read_text(encoding="utf-8"))
    for instrument in laboratory["instrument"]:
        plan, method = truth.PLANS[instrument["name"]], instrument["method"]
        definition = read_definition((SAMPLES / "methods" / f"{method}.toml").read_text(encoding="utf-8"))
        rejected, failed, covered = 0, Counter(), []
        for seed in range(runs):
            run = clean_run(plan, 1000 + seed)
            result = evaluate(definition, [m for m, _ in run])
            failed.update(c.id for c in result.verdict.criteria if not c.passed)
            if not result.verdict.accepted:
                rejected += 1
                continue
            covered.append(shares(result, run, definition.required_cv))
        hits, asked = sum(h for h, _ in covered), sum(n for _, n in covered)
        rate = hits / asked
        # Unknowns of one run share its curve: the run is the unit of the standard error.
        error = math.sqrt(sum((h - rate * n) ** 2 for h, n in covered)) / asked
        print(
            f"{method:20}{100 * rejected / runs:12.2f}{100 * rate:12.2f}{100 * error:8.2f}{asked:10}   "
            f"{dict(failed) or 'none'}",
            flush=True,
        )


def shares(result: object, run: list[tuple[Measured, float]], required_cv: float) -> tuple[int, int]:
    """Intervals that contain the true concentration, and unknowns in the working range."""
    span = working_range(result.curve, required_cv)
    content = {(m.sample, m.dilution): x for m, x in run}
    asked = [
        (q, content[q.sample, q.dilution])
        for q in result.quantities
        if q.role == "unknown" and span.lowest <= content[q.sample, q.dilution] <= span.highest
    ]
    hits = sum(
        (q.lower or 0.0) <= x * q.dilution <= (math.inf if q.upper is None else q.upper) for q, x in asked
    )
    return hits, len(asked)


if __name__ == "__main__":
    main()
