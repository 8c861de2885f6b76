"""Figures as people read them, by examples worked by hand."""

import math
from dataclasses import replace

import pytest
from hypothesis import given
from hypothesis import strategies as st

from calib.bench.records import QuantityRecord
from calib.report import wording

INSIDE = QuantityRecord(
    sample="W-1",
    role="unknown",
    nominal=None,
    replicates=2,
    mean_response=0.59,
    concentration=1.5263,
    estimate=None,
    u=0.0509,
    k=2.069,
    expanded=0.1053,
    lower=1.4213,
    upper=1.6321,
    upper_open=False,
    confidence=0.95,
    kind="curve only",
    degrees_of_freedom=23.0,
    state="ok",
    position="inside",
    flags=(),
    dilution=1.0,
    unit="ug/L",
    curve_id=1,
    budget={},
)
LOPSIDED = replace(INSIDE, state="asymmetric", concentration=1.9, lower=1.2, upper=3.4, k=None, expanded=None)
OPEN_ABOVE = replace(
    INSIDE, state="open-above", concentration=4.0, lower=3.1459, upper=None, u=None, k=None, expanded=None
)
OPEN_BELOW = replace(OPEN_ABOVE, state="open-below", concentration=0.3, lower=0.0, upper=0.9071)
OUTSIDE = {"concentration": None, "estimate": 9.99, "lower": 9.1, "upper": 10.9}


@pytest.mark.parametrize(
    ("value", "u", "expected"),
    [
        # GUM (JCGM 100:2008) 7.2.6, from memory: 10.057 62 ohm with u_c = 27 milliohm is written 10.058.
        (10.05762, 0.027, ("10.058", "0.027")),
        (1.5349, 0.1062, ("1.53", "0.11")),
        (1.0, 0.0996, ("1.00", "0.10")),
        (99.96, 0.0996, ("99.96", "0.10")),
        (56789.0, 1234.0, ("56800", "1200")),
        (123456.0, 99600.0, ("120000", "100000")),
        (-0.004, 0.2, ("0.00", "0.20")),
        (2.5, 0.0, ("2.5", "0")),
        (2.5, math.nan, ("2.5", "–")),
        (1e30, 1e-12, ("1000000000000000000000000000000.0000000000000", "0.0000000000010")),
    ],
)
def test_value_follows_its_uncertainty(value: float, u: float, expected: tuple[str, str]) -> None:
    assert wording.rounded(value, u) == expected


@given(st.floats(-1e6, 1e6), st.floats(1e-6, 1e6))
def test_uncertainty_has_two_digits_and_the_value_is_near(value: float, u: float) -> None:
    shown, uncertainty = wording.rounded(value, u)
    assert len(uncertainty.replace(".", "").lstrip("0").rstrip("0")) <= 2
    assert float(uncertainty) == pytest.approx(u, rel=0.051)
    assert abs(float(shown) - value) <= 0.051 * u + 1e-9 * abs(value)


@pytest.mark.parametrize(
    ("value", "expected"),
    [
        (0.25, "0.25"),
        (6.400000000000001, "6.4"),
        (0.0, "0"),
        (99.996, "100"),
        (12345.6, "12346"),
        (0.00002, "2e-05"),
        (None, "–"),
        (math.nan, "–"),
        (math.inf, "–"),
    ],
)
def test_numbers(value: float | None, expected: str) -> None:
    assert wording.number(value) == expected


def test_significant_keeps_zeros() -> None:
    assert [wording.significant(v) for v in (0.25, 99.996, 10.0)] == ["0.2500", "100.0", "10.00"]


def test_percent_is_of_a_fraction() -> None:
    assert (wording.percent(0.1534), wording.percent(-0.02, 0), wording.percent(None)) == (
        "15.3 %",
        "-2 %",
        "–",
    )


@pytest.mark.parametrize(
    ("q", "short", "long", "interval"),
    [
        (INSIDE, "1.53 ± 0.11 ug/L", "1.53 ug/L", "[1.42, 1.63]"),
        (replace(INSIDE, unit="1"), "1.53 ± 0.11", "1.53", "[1.42, 1.63]"),
        (LOPSIDED, "1.90 [1.20, 3.40] ug/L", "1.90 ug/L", "[1.20, 3.40]"),
        (OPEN_ABOVE, "≥ 3.14 ug/L", "≥ 3.14 ug/L (97.5 % one-sided)", "from 3.14, no upper limit"),
        (OPEN_BELOW, "≤ 0.908 ug/L", "≤ 0.908 ug/L (97.5 % one-sided)", "no lower limit, to 0.908"),
        (replace(INSIDE, state="no-estimate", concentration=None), "no result", "no result", "–"),
        (replace(INSIDE, position=None, concentration=None), "no result", "no result", "–"),
    ],
)
def test_result_by_state(q: QuantityRecord, short: str, long: str, interval: str) -> None:
    assert wording.result_text(q, 0.25, 6.4) == short
    assert wording.quantity_text(q, 0.25, 6.4) == long
    assert wording.interval_text(q) == interval


def test_a_response_the_curve_cannot_explain_is_no_statement_about_the_sample() -> None:
    for position in ("above", "below"):
        q = replace(INSIDE, position=position, state="off-curve", **OUTSIDE)
        assert wording.result_text(q, 0.25, 6.4) == "no result"
        assert wording.quantity_text(q, 0.25, 6.4) == "no result"


def test_replicates_that_contradict_each_other_get_no_interval() -> None:
    q = replace(INSIDE, flags=("replicate-spread",))
    assert "±" not in wording.result_text(q, 0.25, 6.4).replace("no ±", "")
    assert wording.interval_text(q) == wording.expanded_text(q) == "–"


def test_characters_that_hide_or_reorder_are_written_out() -> None:
    assert wording.visible("L-1\u202e\x1b[31m") == "L-1<U+202E><U+001B>[31m"
    assert wording.visible("Prüf-1 µg") == "Prüf-1 µg"


@pytest.mark.parametrize("state", ["ok", "asymmetric", "open-above", "no-estimate"])
def test_outside_the_range_only_the_limit_is_printed(state: str) -> None:
    above = replace(INSIDE, position="above", state=state, **OUTSIDE)
    below = replace(above, position="below")
    assert wording.result_text(above, 0.25, 6.4) == "> 6.4 ug/L: dilute"
    assert wording.quantity_text(above, 0.25, 6.4) == "> 6.4 ug/L (highest standard): dilute"
    assert wording.result_text(below, 0.25, 6.4) == "< 0.25 ug/L"
    assert wording.quantity_text(below, 0.25, 6.4) == "< 0.25 ug/L (lowest standard)"
    assert {wording.interval_text(q) for q in (above, below)} == {"–"}
    assert {wording.expanded_text(q) for q in (above, below)} == {"–"}


def test_limits_scale_with_the_dilution() -> None:
    above = replace(INSIDE, position="above", dilution=10.0, **OUTSIDE)
    assert wording.result_text(above, 0.25, 6.4) == "> 64 ug/L: dilute"
    assert wording.result_text(replace(above, position="below"), 0.25, 6.4) == "< 2.5 ug/L"


def test_a_one_sided_claim_is_rounded_so_that_it_stays_true() -> None:
    assert wording.limit_text(replace(OPEN_ABOVE, lower=3.1499)) == "≥ 3.14 ug/L"
    assert wording.limit_text(replace(OPEN_BELOW, upper=0.9001)) == "≤ 0.901 ug/L"


def test_powers_of_ten_for_the_very_small_and_large() -> None:
    assert wording.plus_minus(1.5349e-7, 0.1062e-7) == "(1.53 ± 0.11) × 10^-7"
    assert wording.plus_minus(5e8, 1.2e7) == "(5.00 ± 0.12) × 10^8"
