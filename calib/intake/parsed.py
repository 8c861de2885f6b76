"""What intake hands on: one frozen picture of a file, its runs and their readings."""

import hashlib
import json
from collections.abc import Mapping
from dataclasses import dataclass, field
from datetime import UTC, datetime
from enum import StrEnum


class Role(StrEnum):
    """What a reading is there for."""

    BLANK = "blank"
    ZERO = "zero"
    STANDARD = "standard"
    ANCHOR = "anchor"
    FIRST_CHECK = "first-check"
    CHECK = "check"
    CONTROL = "control"
    CARRY_OVER = "carry-over"
    UNKNOWN = "unknown"


@dataclass(frozen=True, slots=True)
class Place:
    """Where in a file something stands, as the person who opens the file sees it.

    Attributes
    ----------
    sheet : str or None
        Sheet of a workbook.
    row : int or None
        Row, counted from 1.
    column : str or None
        Heading of the column, without its unit.
    """

    sheet: str | None = None
    row: int | None = None
    column: str | None = None

    def __str__(self) -> str:
        parts = (("sheet", self.sheet), ("row", self.row), ("column", self.column))
        return ", ".join(f"{word} {value}" for word, value in parts if value is not None)


@dataclass(frozen=True, slots=True)
class ParsedReading:
    """One recorded value; `response` is None exactly when `absent_cause` says why.

    `internal_standard` is the response of the internal standard in the same reading, where there is one.
    """

    sample: str
    role: Role
    concentration: float | None
    response: float | None
    response_text: str
    absent_cause: str | None
    replicate: int | None
    dilution: float
    position: str | None
    at: datetime | None
    place: Place
    internal_standard: float | None = None


@dataclass(frozen=True, slots=True)
class ParsedRun:
    """Readings measured together, with what the file itself says about them.

    `at` carries an offset when the file gives one and is plain local time otherwise.
    """

    analyte: str | None
    instrument: str | None
    serial: str | None
    method: str | None
    at: datetime | None
    operator: str | None
    lot: str | None
    concentration_unit: str
    response_unit: str
    readings: tuple[ParsedReading, ...]


@dataclass(frozen=True, slots=True)
class ParsedFile:
    """A file as it was read: its bytes, their fingerprint, its runs, and what was understood."""

    name: str
    size: int
    fingerprint: str
    content: bytes = field(repr=False)
    layout: str
    runs: tuple[ParsedRun, ...]
    understood: tuple[str, ...]


def content_fingerprint(run: ParsedRun) -> str:
    """Fingerprint of what was measured, whatever file it came in.

    Covers instrument, analyte, start, units and the readings in any order. It leaves out
    who measured, serial, method, lot and how a number was spelled: a copy in which only
    those were edited still holds the same measurement.

    Parameters
    ----------
    run : ParsedRun
        The run.

    Returns
    -------
    str
        SHA-256 in hexadecimal digits.
    """
    measured = {
        "instrument": run.instrument,
        "analyte": run.analyte,
        "at": _moment(run.at),
        "concentration_unit": run.concentration_unit,
        "response_unit": run.response_unit,
        "readings": sorted(_canonical(_reading_facts(reading)) for reading in run.readings),
    }
    return hashlib.sha256(_canonical(measured).encode()).hexdigest()


def _reading_facts(reading: ParsedReading) -> dict[str, object]:
    # Left out where there is none, so that fingerprints of files without one stay what they were.
    internal = {} if reading.internal_standard is None else {"internal_standard": reading.internal_standard}
    return internal | {
        "sample": reading.sample,
        "role": reading.role.value,
        "concentration": _plain(reading.concentration),
        "response": _plain(reading.response),
        "absent_cause": reading.absent_cause,
        "replicate": reading.replicate,
        "dilution": reading.dilution,
        "position": reading.position,
    }


def _canonical(facts: Mapping[str, object]) -> str:
    return json.dumps(facts, sort_keys=True, separators=(",", ":"), allow_nan=False)


def _plain(value: float | None) -> float | None:
    # -0.0 and 0.0 are the same measurement, but not the same text.
    return None if value is None else value + 0.0


def _moment(at: datetime | None) -> str | None:
    if at is None:
        return None
    return (at if at.tzinfo is None else at.astimezone(UTC)).isoformat()
