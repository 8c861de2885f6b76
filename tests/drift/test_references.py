import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from calib.drift import Axis, OffBaseline, equivalent_concentrations, ln_recovery, tabulate_baseline
from calib.errors import InputError

GRID = np.geomspace(0.1, 1000, 200)


def saturating(x, capacity=10.0, half=20.0):
    return capacity * x / (half + x)


def falling(x, zero=2.0, midpoint=8.0):
    return zero / (1 + (x / midpoint) ** 1.2)


@pytest.mark.parametrize("curve", [saturating, falling])
def test_a_run_like_the_baseline_reads_the_references(curve):
    references = np.array([0.7, 11.0, 90.0])
    answer = equivalent_concentrations(references, curve(references), tabulate_baseline(GRID, curve(GRID)))
    assert answer.found == pytest.approx(references[np.newaxis], rel=1e-5)
    assert answer.shift_percent == pytest.approx(np.zeros((1, 3)), abs=1e-3)
    assert (answer.reason == OffBaseline.NONE.value).all()


def test_a_change_of_capacity_is_a_shift_that_grows_towards_the_plateau():
    # Solved by hand: 0.9 C x/(h+x) = C x'/(h+x')  =>  x' = 0.9 h x / (h + 0.1 x).
    references = np.array([1.0, 20.0, 100.0])
    weakened = saturating(references, capacity=9.0)
    answer = equivalent_concentrations(references, weakened, tabulate_baseline(GRID, saturating(GRID)))
    expected = 0.9 * 20 * references / (20 + 0.1 * references)
    assert answer.found[0] == pytest.approx(expected, rel=1e-5)
    assert answer.shift_percent[0] == pytest.approx(100 * (expected / references - 1), abs=1e-2)


def test_the_baseline_is_the_mean_of_its_runs():
    runs = np.stack([saturating(GRID, capacity=c) for c in (9.0, 10.0, 11.0)])
    assert tabulate_baseline(GRID, runs).response == pytest.approx(saturating(GRID))


def test_a_line_is_read_on_the_plain_axis_exactly():
    baseline = tabulate_baseline([-1.0, 0.0, 5.0, 12.0], [-1.0, 1.0, 11.0, 25.0], Axis.PLAIN)
    answer = equivalent_concentrations([2.0, 5.0], [[5.5, 11.0]], baseline)
    assert answer.found[0] == pytest.approx([2.25, 5.0])
    assert answer.shift_percent[0] == pytest.approx([12.5, 0.0])


@pytest.mark.parametrize("curve", [saturating, falling])
def test_a_response_off_the_baseline_has_a_reason_and_no_value(curve):
    beyond_low, beyond_high = curve(0.05), curve(2000.0)
    answer = equivalent_concentrations(
        [1.0, 1.0, 1.0, 1.0],
        [[beyond_low, beyond_high, math.nan, curve(1.0)]],
        tabulate_baseline(GRID, curve(GRID)),
    )
    assert np.isnan(answer.found[0]).tolist() == [True, True, True, False]
    assert answer.reason[0].tolist() == [
        OffBaseline.BELOW.value,
        OffBaseline.ABOVE.value,
        OffBaseline.NO_RESPONSE.value,
        "",
    ]


@pytest.mark.parametrize("end", [0, -1])
def test_the_ends_of_the_grid_belong_to_the_baseline(end):
    baseline = tabulate_baseline(GRID, falling(GRID))
    answer = equivalent_concentrations([5.0], [[baseline.response[end]]], baseline)
    assert answer.found[0, 0] == pytest.approx(GRID[end])


@given(st.floats(-12, 12), st.floats(-6, 6), st.floats(0.2, 100), st.floats(0.8, 1.2))
def test_units_of_response_and_concentration_do_not_change_the_shift(of_response, of_concentration, x, gain):
    k, c = 10.0**of_response, 10.0**of_concentration
    plain = equivalent_concentrations([x], [[gain * falling(x)]], tabulate_baseline(GRID, falling(GRID)))
    scaled = equivalent_concentrations(
        [x * c], [[k * gain * falling(x)]], tabulate_baseline(GRID * c, k * falling(GRID))
    )
    assert scaled.shift_percent == pytest.approx(plain.shift_percent, abs=1e-5, nan_ok=True)


@given(st.lists(st.floats(0.0, 2.0), min_size=2, max_size=20))
def test_the_reading_falls_as_a_falling_response_rises(responses):
    rising = np.sort(responses)
    baseline = tabulate_baseline(GRID, falling(GRID))
    found = equivalent_concentrations([1.0], rising[:, np.newaxis], baseline).found[:, 0]
    assert (np.diff(found[np.isfinite(found)]) <= 1e-12).all()


@pytest.mark.parametrize(
    ("grid", "responses", "words"),
    [
        ([1.0, 1.0, 2.0], [1.0, 2.0, 3.0], "strictly rising order"),
        ([1.0], [1.0], "two or more"),
        ([0.0, 1.0], [0.0, 1.0], "has no logarithm"),
        ([1.0, 2.0, 3.0], [1.0, 3.0, 2.0], "steadily after concentration 2"),
        ([1.0, 2.0], [1.0, math.nan], "steadily after concentration 1"),
        ([1.0, 2.0], [1.0, 2.0, 3.0], "for 2 concentrations"),
    ],
)
def test_a_baseline_that_cannot_be_inverted_is_refused(grid, responses, words):
    with pytest.raises(InputError, match=words):
        tabulate_baseline(grid, responses)


@pytest.mark.parametrize(("reference", "words"), [([0.0], "above zero"), ([1.0, 2.0], "for 2 references")])
def test_references_that_do_not_fit_are_refused(reference, words):
    with pytest.raises(InputError, match=words):
        equivalent_concentrations(reference, [[1.0]], tabulate_baseline(GRID, falling(GRID)))


def test_ln_recovery_has_no_value_where_there_is_no_ratio():
    found = ln_recovery([5.5, 5.0, 0.0, -1.0, math.nan, 5.0], [5.0, 5.0, 5.0, 5.0, 5.0, 0.0])
    assert found[:2] == pytest.approx([math.log(1.1), 0.0])
    assert np.isnan(found[2:]).all()
