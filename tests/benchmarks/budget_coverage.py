"""How combined intervals cover, in full: a table of between-run scatter, past runs and concentrations.

Run: .venv/bin/python tests/benchmarks/budget_coverage.py [trials]
"""

import sys
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parents[1]))

from simulated_budget import coverage_of_another_day, coverage_of_budget

trials = int(sys.argv[1]) if len(sys.argv) > 1 else 4000
error = 100 * (0.95 * 0.05 / trials) ** 0.5
print(f"{trials} trials a line, 95 % claimed, three readings; standard error {error:.2f} points")

print("between runs   past runs   concentration   combined   curve only")
for s_b in (0.03, 0.06):
    for past in (6, 10, 20):
        for x in (10.0, 50.0, 300.0):
            covered, without = coverage_of_budget(s_b=s_b, past=past, trials=trials, seed=20260301, x=x)
            print(f"{s_b:12.0%} {past:11d} {x:15g} {covered:10.1%} {without:12.1%}")
print("curve of another day")
for past in (6, 10, 20):
    for x in (10.0, 50.0, 300.0):
        covered, without = coverage_of_another_day(past=past, trials=trials, seed=20260302, x=x)
        print(f"{'':12} {past:11d} {x:15g} {covered:10.1%} {without:12.1%}")
