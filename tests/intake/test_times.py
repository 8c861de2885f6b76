from datetime import UTC, date, datetime, timedelta, timezone

import pytest

from calib.errors import InputError
from calib.intake.times import parse_moment, parse_offset

CET = timezone(timedelta(hours=1))


@pytest.mark.parametrize(
    ("cell", "moment"),
    [
        ("2026-03-02 08:12:00 +0100", datetime(2026, 3, 2, 8, 12, tzinfo=CET)),
        ("2026-03-02T08:12:00+01:00", datetime(2026, 3, 2, 8, 12, tzinfo=CET)),
        ("2026-03-02T08:12:30.5Z", datetime(2026, 3, 2, 8, 12, 30, 500_000, tzinfo=UTC)),
        ("2026-03-02 08:12", datetime(2026, 3, 2, 8, 12)),
        ("02.03.2026 08:31", datetime(2026, 3, 2, 8, 31)),
        ("2.3.2026 8:31", datetime(2026, 3, 2, 8, 31)),
        ("2026-03-02", datetime(2026, 3, 2)),
        (date(2026, 3, 2), datetime(2026, 3, 2)),
        (datetime(2026, 3, 2, 9, 5), datetime(2026, 3, 2, 9, 5)),
    ],
)
def test_dates_as_instruments_write_them(cell, moment):
    assert parse_moment(cell) == moment
    assert parse_moment(cell).utcoffset() == moment.utcoffset()


@pytest.mark.parametrize(
    ("cell", "words"),
    [
        ("31.02.2026 08:00", "does not exist"),
        ("2026-13-01 08:00", "does not exist"),
        ("2026-03-02 25:00", "does not exist"),
        ("03/02/2026 08:00", "cannot be read without guessing"),
        ("yesterday", "cannot be read without guessing"),
        (46083.34, "cannot be read without guessing"),
        (None, "cannot be read without guessing"),
        ("1900-01-01", "lies outside 1950 to 2200"),
        ("2026-03-02 08:00 +99:00", "offset '\\+99:00' does not exist"),
    ],
)
def test_bad_dates_say_how_to_write_them(cell, words):
    with pytest.raises(InputError, match=words):
        parse_moment(cell)


@pytest.mark.parametrize(
    ("text", "minutes"),
    [("+01:00", 60), ("+0530", 330), ("-3", -180), ("Z", 0), ("UTC+1", 60), ("UTC +01:00", 60)],
)
def test_offsets_from_utc(text, minutes):
    assert parse_offset(text).utcoffset(None) == timedelta(minutes=minutes)


@pytest.mark.parametrize("text", ["CET", "1", "+1:75", "+24", "UTC"])
def test_bad_offsets_are_refused(text):
    with pytest.raises(InputError, match="write it as"):
        parse_offset(text)
