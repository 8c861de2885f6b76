"""How often 95 % intervals cover, with the noise model pooled over a history: the full table.

Run: python tests/benchmarks/coverage.py [RUNS] [CASE ...]   (RUNS a cell, 4000 by default)
"""

import sys
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parents[1]))

from simulated_history import CASES, HISTORY, INSIDE, NOISES, REPLICATES, SHARES, coverage


def main() -> None:
    """Print the table."""
    runs = int(sys.argv[1]) if len(sys.argv) > 1 else 4000
    names = sys.argv[2:] or list(CASES)
    print(f"{runs} runs a cell, history of {HISTORY} runs; coverage of 95 % intervals in %")
    heads = "".join(f"{f'{100 * s:.0f} % of span':>15}" for s in SHARES)
    print(f"{'curve':20}{'noise':6}{'wells':6}{'m':>2}{'working range':>16}{heads}{'tails':>12}{'differ':>8}")
    for name in names:
        for noise in NOISES:
            for replicates in (2, 3):
                found = coverage(CASES[name], noise, replicates, runs)
                for i, m in enumerate(REPLICATES):
                    inside = 100 * found.covered[i, :INSIDE]
                    tails = 100 * np.array([found.too_high[i, :INSIDE], found.too_low[i, :INSIDE]])
                    span = f"{inside.min():.1f}–{inside.max():.1f}"
                    rest = "".join(f"{100 * v:15.1f}" for v in found.covered[i, INSIDE:])
                    print(
                        f"{name:20}{noise:6}8x{replicates:<4}{m:>2}{span:>16}{rest}"
                        f"{f'{tails.min():.1f}–{tails.max():.1f}':>12}{found.disagreements:>8}",
                        flush=True,
                    )


if __name__ == "__main__":
    main()
