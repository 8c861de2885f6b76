"""No finite interval where an end is open, whatever the curve and the response."""

from simulated_extremes import wrong_cases


def test_four_thousand_extreme_cases_without_one_exception():
    assert wrong_cases(4_000, seed=20260303) == []
