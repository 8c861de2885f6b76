"""The rule on open ends in 100 000 extreme cases; prints every exception.

Run: .venv/bin/python tests/benchmarks/extreme_intervals.py [cases]
"""

import sys
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parents[1]))

from simulated_extremes import wrong_cases

cases = int(sys.argv[1]) if len(sys.argv) > 1 else 100_000
wrong = wrong_cases(cases, seed=20260304)
print(f"{cases} cases over five models, full and partial curves: {len(wrong)} exceptions")
for line in wrong[:50]:
    print(line)
sys.exit(bool(wrong))
