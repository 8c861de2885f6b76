"""Rows below a heading -> readings -> runs: shared by every table-like layout."""

from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from datetime import datetime
from typing import NamedTuple, ParamSpec, TypeVar

from calib.errors import InputError
from calib.intake.extract import Extract
from calib.intake.facts import Facts
from calib.intake.numbers import (
    NumberText,
    decimal_sign,
    parse_concentration,
    parse_dilution,
    parse_replicate,
    parse_response,
)
from calib.intake.parsed import ParsedReading, ParsedRun, Place
from calib.intake.problems import Problems
from calib.intake.roles import check_level, check_positions, parse_role, sample_name
from calib.intake.rows import Cell, Row, cell_text, shown
from calib.intake.table import Columns, find_columns
from calib.intake.times import parse_moment_or_none
from calib.intake.understood import count, number_style

P = ParamSpec("P")
T = TypeVar("T")

_NUMBER_FIELDS = ("concentration", "response", "dilution", "replicate", "internal_standard")


@dataclass(frozen=True, slots=True)
class Head:
    """What was read above the table of readings."""

    facts: Facts
    sheet: str | None = None
    separator: str | None = None


def read_table(rows: Sequence[Row], head: Head, problems: Problems) -> Extract:
    """Read a table of readings.

    Parameters
    ----------
    rows : sequence of Row
        The heading row and all below it.
    head : Head
        Facts of the file, the sheet and the separator.
    problems : Problems
        What was found above already; raised here together with the row problems.

    Returns
    -------
    Extract
        Runs in the order in which the file begins them.

    Raises
    ------
    InputError
        One of the family: the first problem, counting the rest.
    """
    heading, body = rows[0], [row for row in rows[1:] if row.filled]
    columns = problems.attempt(Place(head.sheet, heading.number), find_columns, heading)
    if columns is None or not body:
        problems.raise_any()
        raise InputError(
            f"row {heading.number}: there is a heading but no readings below it: export the file again"
        )
    sign = decimal_sign(_number_texts(body, columns, head.sheet), head.separator)
    runs = _Table(heading, columns, head, sign, problems).runs(body)
    problems.raise_any()
    return Extract(runs, tuple(_notes(rows[1:], columns, head.separator, sign)))


class _RunKey(NamedTuple):
    """What makes readings of one file one run."""

    analyte: str | None
    instrument: str | None
    method: str | None


@dataclass(frozen=True, slots=True)
class _Table:
    heading: Row
    columns: Columns
    head: Head
    sign: str
    problems: Problems

    def runs(self, rows: Sequence[Row]) -> tuple[ParsedRun, ...]:
        facts_of: dict[_RunKey, Facts] = {}
        readings_of: dict[_RunKey, list[ParsedReading]] = {}
        for row in rows:
            reading, facts = self.reading(row), self.facts(row)
            if reading is None:
                continue
            key = _RunKey(facts.analyte, facts.instrument, facts.method)
            merged = self.attempt(row, None, _merge_facts, facts_of.get(key, facts), facts)
            facts_of[key] = merged or facts
            readings_of.setdefault(key, []).append(reading)
        self.check_keys(readings_of)
        return tuple(self.run(facts, readings_of[key]) for key, facts in facts_of.items())

    def check_keys(self, readings_of: Mapping[_RunKey, list[ParsedReading]]) -> None:
        """Refuse rows that leave open which run they belong to."""
        for field in _RunKey._fields:
            unclear = [readings[0] for key, readings in readings_of.items() if getattr(key, field) is None]
            if 0 < len(unclear) < len(readings_of):
                place = Place(self.head.sheet, unclear[0].place.row)
                self.problems.add(
                    place, InputError(f"the {field} is empty but other rows have one: fill it in")
                )

    def run(self, facts: Facts, readings: list[ParsedReading]) -> ParsedRun:
        check_positions(readings, self.problems)
        return ParsedRun(
            analyte=facts.analyte,
            instrument=facts.instrument,
            serial=facts.serial,
            method=facts.method,
            at=facts.at or self.earliest(readings),
            operator=facts.operator,
            lot=facts.lot,
            concentration_unit=self.columns.concentration_unit,
            response_unit=self.columns.response_unit,
            readings=tuple(readings),
        )

    def facts(self, row: Row) -> Facts:
        head = self.head.facts
        return replace(
            head,
            analyte=self.text(row, "analyte") or head.analyte or self.columns.analyte,
            instrument=self.text(row, "instrument") or head.instrument,
            method=self.text(row, "method") or head.method,
            lot=self.text(row, "lot") or head.lot,
            operator=self.text(row, "operator") or head.operator,
        )

    def reading(self, row: Row) -> ParsedReading | None:
        """Read one row; None where a problem was found in it."""
        found = len(self.problems.found)
        self.attempt(row, None, _check_width, row, self.heading, self.columns)
        role = self.attempt(row, "role", parse_role, self.cell(row, "role"))
        level = self.attempt(
            row, "concentration", parse_concentration, self.cell(row, "concentration"), self.sign
        )
        response = self.attempt(row, "response", parse_response, self.cell(row, "response"), self.sign)
        replicate = self.attempt(row, "replicate", parse_replicate, self.cell(row, "replicate"), self.sign)
        dilution = self.attempt(row, "dilution", parse_dilution, self.cell(row, "dilution"), self.sign)
        at = self.attempt(row, "time", parse_moment_or_none, self.cell(row, "time"))
        internal = self.attempt(
            row, "internal_standard", parse_response, self.cell(row, "internal_standard"), self.sign
        )
        if role is None or response is None or dilution is None or len(self.problems.found) > found:
            return None
        self.attempt(row, "concentration", check_level, role, level)
        sample = self.attempt(row, "sample", sample_name, self.text(row, "sample"), role, level)
        return ParsedReading(
            sample=sample or "",
            role=role,
            concentration=level,
            response=response.value,
            response_text=response.text,
            absent_cause=response.absent_cause,
            replicate=replicate,
            dilution=dilution,
            position=self.text(row, "position"),
            at=at,
            place=self.place(row, "response"),
            internal_standard=None if internal is None else internal.value,
        )

    def earliest(self, readings: list[ParsedReading]) -> datetime | None:
        times = [reading.at for reading in readings if reading.at is not None]
        if len({at.tzinfo is None for at in times}) < 2:
            return min(times, default=None)
        mixed = InputError("some times have an offset from UTC and some have none: write all in one way")
        self.problems.add(Place(self.head.sheet, None, self.columns.fields["time"].name), mixed)
        return None

    def cell(self, row: Row, field: str) -> Cell:
        heading = self.columns.fields.get(field)
        return None if heading is None else row.cell(heading.index)

    def text(self, row: Row, field: str) -> str | None:
        return cell_text(self.cell(row, field)) or None

    def place(self, row: Row, field: str | None) -> Place:
        heading = None if field is None else self.columns.fields.get(field)
        return Place(self.head.sheet, row.number, None if heading is None else heading.name)

    def attempt(
        self, row: Row, field: str | None, parse: Callable[P, T], *args: P.args, **kwargs: P.kwargs
    ) -> T | None:
        return self.problems.attempt(self.place(row, field), parse, *args, **kwargs)


def _check_width(row: Row, heading: Row, columns: Columns) -> None:
    for index, cell in enumerate(row.cells):
        if cell is not None and heading.cell(index) is None:
            raise InputError(
                f"{shown(cell)} stands under no heading: a decimal comma in a file separated by commas, "
                f"or a heading is missing"
            )
    if len(row.cells) <= columns.fields["response"].index:
        raise InputError("the row ends before its response: export the file again, or complete the row")


def _merge_facts(above: Facts, facts: Facts) -> Facts:
    for what, one, other in (("lot", above.lot, facts.lot), ("operator", above.operator, facts.operator)):
        if one is not None and other is not None and one != other:
            raise InputError(f"{what} {other} differs from {one} above in the same run: keep one")
    return replace(above, lot=above.lot or facts.lot, operator=above.operator or facts.operator)


def _number_texts(rows: Sequence[Row], columns: Columns, sheet: str | None) -> Iterator[NumberText]:
    headings = [columns.fields[field] for field in _NUMBER_FIELDS if field in columns.fields]
    for row in rows:
        for heading in headings:
            cell = row.cell(heading.index)
            if isinstance(cell, str):
                yield NumberText(cell, Place(sheet, row.number, heading.name))


def _notes(rows: Sequence[Row], columns: Columns, separator: str | None, sign: str) -> Iterator[str]:
    if separator is not None:
        yield number_style(separator, sign)
    if columns.unused:
        yield f"Columns not used: {', '.join(columns.unused)}."
    # A line end after the last row is no empty row.
    filled = [i for i, row in enumerate(rows, start=1) if row.filled]
    if filled and filled[-1] > len(filled):
        yield f"{count(filled[-1] - len(filled), 'empty row')} skipped."
    if "dilution" not in columns.fields:
        yield "No column of dilutions: all taken as undiluted."
