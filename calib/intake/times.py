"""Dates and times as instruments write them."""

import re
from datetime import UTC, date, datetime, time, timedelta, timezone, tzinfo

from calib.errors import InputError
from calib.intake.rows import Cell, cell_text, shown

_CLOCK = r"(?P<hour>\d{1,2}):(?P<minute>\d\d)(?::(?P<second>\d\d)(?:[.,](?P<fraction>\d{1,6})\d*)?)?"
_OFFSET = r"(?P<offset>Z|[+-]\d\d?(?::?\d\d)?)"
_ISO = re.compile(
    rf"(?P<year>\d{{4}})-(?P<month>\d\d)-(?P<day>\d\d)(?:(?:T|\s+){_CLOCK}\s*{_OFFSET}?)?", re.ASCII
)
_DOTTED = re.compile(
    rf"(?P<day>\d{{1,2}})\.(?P<month>\d{{1,2}})\.(?P<year>\d{{4}})(?:\s+{_CLOCK}\s*{_OFFSET}?)?", re.ASCII
)
_FIELDS = ("year", "month", "day", "hour", "minute", "second")
_HOW = "write it as 2026-03-02 08:12 +01:00 or 02.03.2026 08:12"
_FIRST_YEAR, _LAST_YEAR = 1950, 2200  # a year outside is a clock that was never set
_WIDEST_OFFSET = timedelta(hours=14)  # the widest offset in use on Earth


def parse_moment(cell: Cell) -> datetime:
    """Read a date with its time; with an offset where one is written.

    A date alone is the start of that day. Day/month/year with strokes is refused, since
    day and month cannot be told apart.

    Raises
    ------
    InputError
        If the cell holds no such date, or one that does not exist.
    """
    moment = _typed_moment(cell) or _written_moment(cell_text(cell), cell)
    if not _FIRST_YEAR <= moment.year <= _LAST_YEAR:
        raise InputError(f"the date {shown(cell)} lies outside {_FIRST_YEAR} to {_LAST_YEAR}: correct it")
    return moment


def parse_moment_or_none(cell: Cell) -> datetime | None:
    """Read a date with its time; an empty cell gives None.

    Raises
    ------
    InputError
        As `parse_moment`.
    """
    return None if cell is None else parse_moment(cell)


def parse_offset(cell: Cell) -> tzinfo:
    """Read an offset from UTC such as ``+01:00``, ``+0100``, ``-3`` or ``Z``.

    Raises
    ------
    InputError
        If the cell holds no such offset.
    """
    text = re.sub(r"^UTC\s*(?=.)", "", cell_text(cell))
    if re.fullmatch(_OFFSET, text, re.ASCII):
        return _offset(text)
    raise InputError(f"the UTC offset {shown(cell)} cannot be read: write it as +01:00")


def _typed_moment(cell: Cell) -> datetime | None:
    if isinstance(cell, datetime):
        return cell
    return datetime.combine(cell, time()) if isinstance(cell, date) else None


def _written_moment(text: str, cell: Cell) -> datetime:
    match = _ISO.fullmatch(text) or _DOTTED.fullmatch(text)
    if match is None:
        raise InputError(f"the date {shown(cell)} cannot be read without guessing: {_HOW}")
    year, month, day, hour, minute, second = (int(match[name] or 0) for name in _FIELDS)
    microsecond = int((match["fraction"] or "").ljust(6, "0"))
    offset = None if match["offset"] is None else _offset(match["offset"])
    try:
        return datetime(year, month, day, hour, minute, second, microsecond, tzinfo=offset)
    except ValueError as error:
        raise InputError(f"the date {shown(cell)} does not exist ({error}): {_HOW}") from None


def _offset(text: str) -> tzinfo:
    if text == "Z":
        return UTC
    digits = text[1:].replace(":", "")
    hours, minutes = (int(digits), 0) if len(digits) <= 2 else (int(digits[:-2]), int(digits[-2:]))
    distance = timedelta(hours=hours, minutes=minutes)
    if minutes > 59 or distance > _WIDEST_OFFSET:
        raise InputError(f"the UTC offset {text!r} does not exist: write it as +01:00")
    return timezone(-distance if text[0] == "-" else distance)
