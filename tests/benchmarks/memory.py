"""Peak memory of big stacks and batches over their input, each measured in a fresh process.

`tracemalloc` counts what Python and numpy allocate. *Result* is what is still held when the
call returns; *working* is the peak minus the result, what the computation itself needs.
Run: python tests/benchmarks/memory.py
"""

from __future__ import annotations

import subprocess
import sys
import tracemalloc
from collections.abc import Callable

import numpy as np

import calib

LEVELS = np.repeat(3.0 ** np.arange(-5, 3) * 100, 3)
TRUTH = (0.05, 2.5, 100.0, 1.2)
MEBIBYTE = 2.0**20


def mean(x: np.ndarray) -> np.ndarray:
    """The true 4PL."""
    zero, infinite, midpoint, slope = TRUTH
    return infinite + (zero - infinite) / (1 + (x / midpoint) ** slope)


def fitting(runs: int) -> Callable[[], object]:
    """A stack of runs of 24 readings."""
    y = mean(LEVELS) + 0.03 * np.random.default_rng(1).standard_normal((runs, LEVELS.size))
    return lambda: calib.fit_stack(LEVELS, y)


def reading(interval: str, unknowns: int) -> Callable[[], object]:
    """A batch of unknowns on one curve."""
    random = np.random.default_rng(2)
    curve = calib.fit(LEVELS, mean(LEVELS) + 0.03 * random.standard_normal(LEVELS.size))
    y = random.uniform(0.1, 2.4, unknowns)
    return lambda: curve.invert(y, interval=interval)


CASES: dict[str, tuple[Callable[[int], Callable[[], object]], tuple[int, int]]] = {
    "fit_stack": (fitting, (10_000, 100_000)),
    "delta": (lambda n: reading("delta", n), (100_000, 1_000_000)),
    "inversion": (lambda n: reading("inversion", n), (10_000, 100_000)),
}


def measured(case: str, size: int) -> tuple[float, float]:
    """Peak over the input and size of the result in MiB."""
    prepare = CASES[case][0]
    prepare(50)()  # imports and caches are not what is asked
    run = prepare(size)
    tracemalloc.start()
    result = run()
    held, peak = tracemalloc.get_traced_memory()
    tracemalloc.stop()
    del result
    return peak / MEBIBYTE, held / MEBIBYTE


def main() -> None:
    """Print the table, or with a case and a size one measurement."""
    if len(sys.argv) == 3:
        print(*measured(sys.argv[1], int(sys.argv[2])))
        return
    print(
        f"{'MiB':12}{'size':>10}{'peak':>9}{'result':>9}{'working':>9}   ratios to the smaller: peak, working"
    )
    for case, (_, sizes) in CASES.items():
        first: tuple[float, float] | None = None
        for size in sizes:
            printed = subprocess.run(
                [sys.executable, __file__, case, str(size)], check=True, capture_output=True, text=True
            ).stdout
            peak, held = (float(v) for v in printed.split())
            first = first or (peak, peak - held)
            ratio = f"{peak / first[0]:12.2f}{(peak - held) / first[1]:8.2f}" if size != sizes[0] else ""
            print(f"{case:12}{size:10}{peak:9.1f}{held:9.1f}{peak - held:9.1f}{ratio}", flush=True)


if __name__ == "__main__":
    main()
