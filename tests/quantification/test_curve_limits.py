"""Decision and detection limit of a curve: how often either errs, by simulation with fixed seeds."""

import math

import numpy as np
import pytest

import calib
from calib.errors import InputError
from calib.quantification.curve_limits import curve_limits

LEVELS = np.repeat([0.457, 1.37, 4.12, 12.3, 37.0, 111.0, 333.0, 1000.0], 2)
RUNS = 400


def rising(x):
    return 0.05 + 2.45 / (1 + (100 / np.maximum(x, 1e-12)) ** 1.2)


def falling(x):
    return 2.5 - rising(x)


@pytest.fixture(scope="module", params=[rising, falling], ids=["rising", "falling"])
def simulated(request):
    """Curves with a constant scatter of 0.03 about a 4PL, and the limits of each."""
    chance = np.random.default_rng(20)
    truth = request.param
    responses = truth(LEVELS) + chance.normal(0, 0.03, (RUNS, LEVELS.size))
    stack = calib.fit_stack(LEVELS, responses, model="4PL")
    limits = [curve_limits(stack[i]) for i in range(RUNS)]
    return truth, stack, limits, chance


def test_a_blank_is_taken_for_a_sample_in_five_percent(simulated):
    # 4 to 7 % is the goal; 400 runs have a standard error of 1.1 points.
    truth, stack, limits, chance = simulated
    side = np.sign(truth(1e6) - truth(0.0))
    blanks = truth(0.0) + chance.normal(0, 0.03, RUNS)
    beyond = [side * (b - float(stack[i].predict(limits[i].critical))) > 0 for i, b in enumerate(blanks)]
    assert 0.025 <= np.mean(beyond) <= 0.085


def test_a_sample_at_the_detection_limit_is_missed_in_five_percent(simulated):
    truth, stack, limits, chance = simulated
    side = np.sign(truth(1e6) - truth(0.0))
    typical = float(np.median([found.detectable for found in limits]))
    samples = truth(typical) + chance.normal(0, 0.03, RUNS)
    missed = [side * (s - float(stack[i].predict(limits[i].critical))) <= 0 for i, s in enumerate(samples)]
    assert 0.025 <= np.mean(missed) <= 0.085


def test_the_limits_rise_and_none_lies_below_the_standards_as_a_quantity(simulated):
    _, _, limits, _ = simulated
    assert all(found.critical < found.detectable <= found.quantifiable for found in limits)
    assert all(found.quantifiable >= LEVELS[0] for found in limits)


def test_more_replicates_detect_less():
    curve = calib.fit(LEVELS, rising(LEVELS) + np.tile([0.03, -0.03], 8), model="4PL")
    assert curve_limits(curve, replicates=4).detectable < curve_limits(curve).detectable


def test_a_curve_that_rises_too_little_detects_nothing():
    chance = np.random.default_rng(4)
    curve = calib.fit(LEVELS, 1 + 1e-4 * LEVELS + chance.normal(0, 1.0, LEVELS.size), model="line")
    assert math.isnan(curve_limits(curve).detectable)


def test_an_impossible_question_is_refused():
    curve = calib.fit(LEVELS, rising(LEVELS) + np.tile([0.03, -0.03], 8), model="4PL")
    with pytest.raises(InputError, match=r"0 replicates at alpha 0\.05"):
        curve_limits(curve, replicates=0)
