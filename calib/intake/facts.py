"""What the head of a file says about its run."""

from collections.abc import Iterable
from dataclasses import dataclass
from datetime import datetime, tzinfo

from calib.errors import InputError
from calib.intake.parsed import Place
from calib.intake.problems import Problems
from calib.intake.rows import Cell, Row, cell_text, shown, word
from calib.intake.times import parse_moment, parse_offset

_FACT_OF_KEY = {
    "analyte": "analyte",
    "instrument": "instrument",
    "serial": "serial",
    "serial number": "serial",
    "started": "at",
    "run started": "at",
    "date": "at",
    "utc offset": "offset",
    "operator": "operator",
    "method": "method",
    "standard lot": "lot",
    "lot": "lot",
    "concentration unit": "concentration_unit",
    "response unit": "response_unit",
}


@dataclass(frozen=True, slots=True)
class Pair:
    """A key of the head, its value, and where it stands."""

    key: str
    value: Cell
    place: Place


@dataclass(frozen=True, slots=True)
class Facts:
    """What is known of a run apart from its readings; None where the file is silent."""

    analyte: str | None = None
    instrument: str | None = None
    serial: str | None = None
    method: str | None = None
    at: datetime | None = None
    operator: str | None = None
    lot: str | None = None
    concentration_unit: str | None = None
    response_unit: str | None = None


def pairs_from_rows(rows: Iterable[Row], sheet: str | None = None) -> list[Pair]:
    """Take the rows of two cells as key and value; titles and empty rows are passed over."""
    return [
        Pair(cell_text(row.cells[0]), row.cell(1), Place(sheet, row.number))
        for row in rows
        if row.filled > 1 and row.cells[0] is not None
    ]


def is_fact(key: Cell) -> bool:
    """Whether a word is a key that the head of a file may have."""
    return word(key) in _FACT_OF_KEY


def read_facts(pairs: Iterable[Pair], problems: Problems) -> tuple[Facts, tuple[str, ...]]:
    """Sort the pairs of a head into facts.

    Parameters
    ----------
    pairs : iterable of Pair
        Keys and values in the order of the file.
    problems : Problems
        Takes keys that are given twice differently, and dates that cannot be read.

    Returns
    -------
    tuple of Facts and tuple of str
        The facts, and the keys that were not used.
    """
    known: dict[str, Pair] = {}
    unused: list[str] = []
    for pair in pairs:
        fact = _FACT_OF_KEY.get(word(pair.key))
        if fact is None:
            unused.append(pair.key)
        elif pair.value is not None:
            problems.attempt(pair.place, _note, known, fact, pair)
    return _facts(known, _start(known, problems)), tuple(unused)


def _facts(known: dict[str, Pair], at: datetime | None) -> Facts:
    texts = {fact: cell_text(pair.value) for fact, pair in known.items()}
    return Facts(
        analyte=texts.get("analyte"),
        instrument=texts.get("instrument"),
        serial=texts.get("serial"),
        method=texts.get("method"),
        at=at,
        operator=texts.get("operator"),
        lot=texts.get("lot"),
        concentration_unit=texts.get("concentration_unit"),
        response_unit=texts.get("response_unit"),
    )


def _note(known: dict[str, Pair], fact: str, pair: Pair) -> None:
    earlier = known.setdefault(fact, pair)
    if earlier.value != pair.value:
        raise InputError(
            f"{pair.key} is given twice, as {shown(earlier.value)} and as {shown(pair.value)}: "
            f"keep the right one"
        )


def _start(known: dict[str, Pair], problems: Problems) -> datetime | None:
    moment, offset = known.get("at"), known.get("offset")
    zone = None if offset is None else problems.attempt(offset.place, parse_offset, offset.value)
    at = None if moment is None else problems.attempt(moment.place, parse_moment, moment.value)
    if at is None or zone is None or offset is None:
        return at
    return problems.attempt(offset.place, _zoned, at, zone)


def _zoned(at: datetime, zone: tzinfo) -> datetime:
    zoned = at.replace(tzinfo=zone)
    if at.tzinfo is not None and at.utcoffset() != zoned.utcoffset():
        raise InputError(
            f"the UTC offset differs from the one in the date {at.isoformat()!r}: keep the right one"
        )
    return zoned
