"""Results that a correction changes say so themselves."""

import re

import pytest
from small_laboratory import a_day, header_block, unknown

from calib.bench.amend_run import Change
from calib.bench.method_definition import read_definition
from calib.bench.register import add_instrument
from calib.errors import InputError, MethodError

LATER = "2026-04-01T15:00:00+02:00"


def test_a_run_of_unknowns_tells_that_it_was_read_again(bench):
    bench.log(a_day())
    later = bench.quantify([unknown("U7", 7.0)], started=LATER)
    corrected = bench.laboratory.exclude(1, ["#3"], reason="a bubble")
    assert corrected.dependents == (later.heading.id,)
    (told,) = bench.laboratory.run(later.heading.id).amendments
    assert re.search(r"read again on curve 2, because run 1 was corrected; the values on curve 1", told.what)
    assert told.reason == "a bubble"


def test_a_renamed_sample_tells_its_old_name(bench):
    bench.log(a_day())
    record = bench.laboratory.amend(1, Change(samples=(("U1", "U9"),)), reason="wrong label")
    assert ("sample U1 renamed U9", "wrong label") in [(a.what, a.reason) for a in record.amendments]


def test_an_amended_operator_tells_from_and_to(bench):
    before = bench.log(a_day()).heading.operator
    record = bench.laboratory.amend(1, Change(operator="ZZ"), reason="typo")
    assert f"amended operator from {before} to ZZ" in [a.what for a in record.amendments]


def test_a_run_of_tomorrow_is_refused(bench):
    text = header_block(a_day(), started="2099-04-01T08:00:00+02:00")
    with pytest.raises(InputError, match="lies in the future of this computer's clock"):
        bench.laboratory.log(bench.file("f.csv", text))


@pytest.mark.parametrize("name", ["", "  ", "PP\x1b[31m", "a\nb", "x" * 101, "lx-1"])
def test_a_name_that_cannot_be_is_refused(bench, name):
    with pytest.raises(InputError):
        add_instrument(
            bench.store,
            name,
            kind="probe",
            serial="1",
            location="",
            response_ceiling=None,
            utc_offset_minutes=0,
            by="KM",
        )


METHOD = """
name = "m"
analyte = "a"
concentration_unit = "mg/L"
response_unit = "1"
model = "4PL"
{extra}
[acceptance]
preset = "plain"
"""


@pytest.mark.parametrize(
    ("extra", "words"),
    [
        ("fixed = { slope = -1.0 }", "fixed slope = -1 lies outside"),
        ("bounds = { slope = [-5.0, -1.0] }", "must allow values above 0"),
        ("fixed = { slope = 1.0 }\nbounds = { slope = [2.0, 3.0] }", "slope is fixed and has bounds"),
        ("fixed = { zero = 1.0, infinite = 2.0, midpoint = 3.0, slope = 1.0 }", "leave at least one free"),
    ],
)
def test_a_method_no_run_can_be_fitted_by_is_refused_when_it_is_added(extra, words):
    with pytest.raises(MethodError, match=words):
        read_definition(METHOD.format(extra=extra))
