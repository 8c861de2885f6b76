"""Rows of cells: the one shape that text tables and sheets are brought to."""

import csv
import io
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from datetime import date, datetime, time
from typing import TypeAlias

from calib.errors import UnreadableFile

Cell: TypeAlias = str | int | float | bool | datetime | date | time | None
"""A cell: stripped text, a typed value of a sheet, or None where it is empty."""

SEPARATORS = {",": "comma", ";": "semicolon", "\t": "tab"}


@dataclass(frozen=True, slots=True)
class Row:
    """One row with its number as the person sees it."""

    number: int
    cells: tuple[Cell, ...]

    def cell(self, index: int) -> Cell:
        """Return the cell of a column; a row that ends early has empty cells there."""
        return self.cells[index] if index < len(self.cells) else None

    @property
    def filled(self) -> int:
        """Number of cells that hold something."""
        return sum(cell is not None for cell in self.cells)


def make_row(number: int, cells: Iterable[Cell]) -> Row:
    """Build a row; text is stripped, and text of nothing but spaces is an empty cell."""
    return Row(number, tuple(_stripped(cell) for cell in cells))


def cell_text(cell: Cell) -> str:
    """Return what a cell shows, as text; an empty cell gives an empty text."""
    return "" if cell is None else str(cell)


def shown(cell: Cell) -> str:
    """Quote a cell for a message: one line, cut where it is long."""
    text = cell_text(cell)
    return repr(text if len(text) <= 40 else text[:37] + "...")


def first_line(text: str) -> str:
    """Return the first line that is not empty."""
    return text.lstrip().partition("\n")[0]


def word(cell: Cell) -> str:
    """Return a cell as a word to compare: small letters, single spaces."""
    return " ".join(cell_text(cell).casefold().split())


def guess_separator(line: str) -> str:
    """Return the separator that occurs most often in a heading line."""
    return max(SEPARATORS, key=line.count)


def split_rows(text: str, separator: str) -> tuple[Row, ...]:
    """Split text into rows of cells; quoted cells may hold separators and line ends.

    Raises
    ------
    UnreadableFile
        If a quotation mark has no partner; everything below it would be lost.
    """
    reader = csv.reader(
        io.StringIO(text, newline=None), delimiter=separator, skipinitialspace=True, strict=True
    )
    rows: list[Row] = []
    start = 1
    try:
        for cells in reader:
            rows.append(make_row(start, cells))
            start = reader.line_num + 1
    except csv.Error as error:
        raise UnreadableFile(
            f"row {start}: the cells cannot be told apart ({error}): check the quotation marks there"
        ) from None
    return tuple(rows)


def first_table_row(rows: Sequence[Row]) -> int:
    """Return the index of the first row with three or more filled cells: the heading of the readings.

    Raises
    ------
    UnreadableFile
        If there is none.
    """
    for index, row in enumerate(rows):
        if row.filled >= 3:
            return index
    raise UnreadableFile(
        "there is a header but no table of readings below it: export the file again with its readings"
    )


def _stripped(cell: Cell) -> Cell:
    return (cell.strip() or None) if isinstance(cell, str) else cell
