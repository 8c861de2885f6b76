"""Expired or unknown standard lots are refused, unless a person overrides with a reason that is kept."""

from datetime import date

import pytest
from small_laboratory import a_day, header_block, state_of

from calib.bench.register import LotRecord, add_lot
from calib.errors import CalibError

REASON = "compared with the new lot, 0.4 % apart"


@pytest.fixture
def dated(bench):
    rest = (None, None, None)
    add_lot(bench.store, LotRecord("OLD", "x", 1.0, "mg/L", 0.1, 2.0, date(2026, 3, 31), *rest), by="KM")
    add_lot(bench.store, LotRecord("NEW", "x", 1.0, "mg/L", 0.1, 2.0, date(2026, 4, 1), *rest), by="KM")
    return bench


def file_of(bench, lot):
    return bench.file(f"{lot}.csv", header_block(a_day(), standard_lot=lot))


@pytest.mark.parametrize(
    ("lot", "words"),
    [
        (
            "OLD",
            "standard lot OLD expired on 2026-03-31, before this run; calibrate with one in date, or log it",
        ),
        ("NONE", "unknown standard lot 'NONE'; .* --override-lot"),
    ],
)
def test_an_expired_or_unknown_lot_is_refused_and_nothing_is_written(dated, lot, words):
    before = state_of(dated.store)
    with pytest.raises(CalibError, match=words):
        dated.laboratory.log(file_of(dated, lot))
    assert state_of(dated.store) == before


def test_a_lot_is_good_on_its_last_day(dated):
    (record,) = dated.laboratory.log(file_of(dated, "NEW"))
    assert record.heading.lot == "NEW"


@pytest.mark.parametrize(
    ("lot", "kept", "what"),
    [
        ("OLD", "OLD", "overrode a rule: standard lot OLD expired on 2026-03-31, before this run"),
        ("NONE", None, "overrode a rule: standard lot NONE is not registered"),
    ],
)
def test_an_override_needs_a_reason_and_stays_with_the_run(dated, lot, kept, what):
    with pytest.raises(CalibError, match="needs a reason in words"):
        dated.laboratory.log(file_of(dated, lot), lot_override=" ")
    (record,) = dated.laboratory.log(file_of(dated, lot), lot_override=REASON)
    assert record.heading.lot == kept
    assert [(a.what, a.reason, a.by) for a in record.amendments] == [(what, REASON, "KM")]
    assert dated.laboratory.run(record.heading.id).amendments == record.amendments


def test_a_lot_in_order_has_nothing_to_override(dated):
    (record,) = dated.laboratory.log(file_of(dated, "NEW"), lot_override=REASON)
    assert record.amendments == ()
