import dataclasses
from datetime import timedelta

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from calib.intake import ParsedRun, Role, content_fingerprint, read_bytes, read_text

from .written import LONG, WRITERS, Line, long_form


def kept_by_a_workbook(value: float) -> float:
    """Round to 15 digits: a workbook does not keep the last bits of a number."""
    return float(f"{value:.15g}") + 0.0


def numbers(lowest: float, highest: float) -> st.SearchStrategy[float]:
    return st.floats(lowest, highest, allow_nan=False).map(kept_by_a_workbook)


AMOUNTS = numbers(0, 1e6)
RESPONSES = numbers(-1e6, 1e9) | st.sampled_from(["OVRFLW", "ND", "ERR"])
NAMES = st.text("abcXYZ019-", min_size=1, max_size=8).map(lambda name: f"S{name}")
LEVELLED = st.builds(
    Line, NAMES, st.sampled_from([Role.STANDARD, Role.ANCHOR, Role.CHECK]), AMOUNTS, RESPONSES
)
UNKNOWNS = st.builds(Line, NAMES, st.just(Role.UNKNOWN), st.none(), RESPONSES, numbers(1, 1000))
# The first line settles the decimal sign, as a file of nothing but "1,234" would rightly be refused.
LINES = st.lists(LEVELLED | UNKNOWNS, max_size=12).map(
    lambda lines: [Line("S0", Role.STANDARD, 0.5, 0.25), *lines]
)


def only_run(content: bytes) -> ParsedRun:
    (run,) = read_bytes("run", content).runs
    return run


@settings(max_examples=25, deadline=None)  # each example writes and reads a workbook
@given(lines=LINES)
def test_the_fingerprint_does_not_depend_on_the_layout(lines):
    assert len({content_fingerprint(only_run(write(lines))) for write in WRITERS.values()}) == 1


@given(lines=LINES, separator=st.sampled_from(",;\t"), sign=st.sampled_from(".,"))
def test_the_fingerprint_does_not_depend_on_separator_and_decimal_sign(lines, separator, sign):
    plain, other = long_form(lines), long_form(lines, separator, sign)
    assert content_fingerprint(only_run(plain)) == content_fingerprint(only_run(other))


@given(lines=LINES, data=st.data())
def test_the_fingerprint_does_not_depend_on_the_order_of_rows(lines, data):
    run = only_run(long_form(lines))
    shuffled = dataclasses.replace(run, readings=tuple(data.draw(st.permutations(run.readings))))
    assert content_fingerprint(run) == content_fingerprint(shuffled)


@pytest.mark.parametrize(
    ("field", "value"),
    [
        ("sample", "other"),
        ("role", Role.CHECK),
        ("concentration", 2.0),
        ("response", 0.5000001),
        ("dilution", 2.0),
        ("position", "H12"),
        ("replicate", 7),
    ],
)
def test_the_fingerprint_sees_each_part_of_a_reading(field, value):
    (run,) = read_text(LONG).runs
    changed = dataclasses.replace(run.readings[0], **{field: value})
    other = dataclasses.replace(run, readings=(changed, *run.readings[1:]))
    assert content_fingerprint(run) != content_fingerprint(other)


@pytest.mark.parametrize("field", ["analyte", "instrument", "concentration_unit", "response_unit"])
def test_the_fingerprint_sees_what_was_measured_and_where(field):
    (run,) = read_text(LONG).runs
    assert content_fingerprint(run) != content_fingerprint(dataclasses.replace(run, **{field: "other"}))


def test_the_fingerprint_sees_when_but_not_who():
    (run,) = read_text(LONG).runs
    assert run.at is not None
    later = dataclasses.replace(run, at=run.at + timedelta(days=1))
    assert content_fingerprint(run) != content_fingerprint(later)
    assert content_fingerprint(run) == content_fingerprint(dataclasses.replace(run, operator="JT"))
