"""A few runs of the simulated season: clean ones pass, and planted faults are caught."""

import sys
from pathlib import Path

import pytest

sys.path.insert(0, str(Path(__file__).parents[1] / "benchmarks"))

from rules_caught import BENCHES, FAULTS, Truth, caught, expired, rate

RUNS = 20
ENVIRONMENTAL, METALS = BENCHES[2], BENCHES[3]


def count(bench, truth):
    return sum(caught(evaluation) for evaluation in rate(bench, truth, RUNS, 5))


def test_clean_runs_of_a_steady_instrument_are_seldom_rejected():
    # 400 runs: 0 % for metals, see the benchmark; 20 runs with 3 rejected would be one in a thousand at 3 %.
    assert count(METALS, Truth()) <= 2


@pytest.mark.parametrize("fault", [name for name in FAULTS if not name.startswith(("carry-over", "noisy"))])
def test_a_planted_fault_is_caught_in_nearly_every_run(fault):
    assert count(METALS, FAULTS[fault]) >= RUNS - 2


def test_a_noisy_plate_is_caught():
    assert count(ENVIRONMENTAL, FAULTS["noisy plate: scatter times 4"]) >= RUNS - 2


def test_an_expired_curve_is_never_used():
    assert expired(2) == (2, 2)


def test_controls_lie_among_the_concentrations_of_the_samples():
    """Controls at 2.5, 40 and 85 mg/L; samples from 3 to 60 mg/L: only one level lies among them."""
    (evaluation,) = rate(BENCHES[0], Truth(), 1, 5)
    (told,) = [c for c in evaluation.verdict.criteria if c.id == "controls_in_sample_range"]
    assert (told.observed, told.passed, told.warns) == (1, False, True)
    assert evaluation.verdict.decision == "accepted"
