"""Layout `workbook`: sheet Info with key and value, sheet Readings with one row a reading."""

import io
import warnings
import zipfile
import zlib
from collections.abc import Iterator
from typing import TYPE_CHECKING

from calib.errors import InputError, UnreadableFile
from calib.intake.extract import Extract, Layout, Source
from calib.intake.facts import pairs_from_rows, read_facts
from calib.intake.parsed import Place
from calib.intake.problems import Problems
from calib.intake.readings import Head, read_table
from calib.intake.rows import Cell, Row, first_table_row, make_row
from calib.intake.understood import unused_keys

if TYPE_CHECKING:
    from openpyxl import Workbook
    from openpyxl.worksheet.worksheet import Worksheet

MOST_UNPACKED_BYTES = 200_000_000
MOST_CELLS = 2_000_000
ZIP_MARK = b"PK\x03\x04"

# What the zip and XML readers raise on a damaged file; they have no common base.
_DAMAGED = (
    zipfile.BadZipFile,
    zlib.error,
    LookupError,
    ValueError,
    TypeError,
    AttributeError,
    OSError,
    EOFError,
    SyntaxError,
    RuntimeError,
)


def _recognises(source: Source) -> bool:
    return source.text is None


def _read(source: Source) -> Extract:
    if source.text is not None:
        raise UnreadableFile("this is text, not a workbook: leave the layout out, or name the right one")
    _check_unpacked_size(source.content)
    book = _open(source.content, stored_values=False)
    readings = _readings_sheet(book)
    info = next((sheet for sheet in book.worksheets if sheet.title.casefold() == "info"), None)
    problems = Problems()
    rows = _rows(readings, source.content, problems)
    head = [] if info is None else pairs_from_rows(_rows(info, source.content, problems), info.title)
    facts, unused = read_facts(head, problems)
    start = first_table_row(rows)
    _check_merged(readings, rows[start].number, problems)
    extract = read_table(rows[start:], Head(facts, sheet=readings.title), problems)
    return Extract(extract.runs, unused_keys(unused) + extract.notes)


def _check_unpacked_size(content: bytes) -> None:
    try:
        with zipfile.ZipFile(io.BytesIO(content)) as archive:
            size = sum(entry.file_size for entry in archive.infolist())
    except _DAMAGED as error:
        raise _no_workbook(error) from None
    if size > MOST_UNPACKED_BYTES:
        raise UnreadableFile(
            f"the workbook unpacks to {size / 1e6:.0f} MB, more than the {MOST_UNPACKED_BYTES / 1e6:.0f} MB "
            f"allowed: save only the sheets Info and Readings"
        )


def _open(content: bytes, *, stored_values: bool) -> "Workbook":
    import openpyxl
    from openpyxl.utils.exceptions import InvalidFileException

    try:
        with warnings.catch_warnings():
            # It warns of what it would drop on saving; nothing is saved here.
            warnings.simplefilter("ignore")
            return openpyxl.load_workbook(io.BytesIO(content), data_only=stored_values)
    except (*_DAMAGED, InvalidFileException) as error:
        raise _no_workbook(error) from None


def _no_workbook(error: Exception) -> UnreadableFile:
    return UnreadableFile(
        f"it begins like a workbook but is none, or is damaged ({type(error).__name__}): "
        f"save it again as .xlsx"
    )


def _readings_sheet(book: "Workbook") -> "Worksheet":
    sheets = book.worksheets
    for sheet in sheets:
        if sheet.title.casefold() == "readings" or len(sheets) == 1:
            return sheet
    raise UnreadableFile(
        f"the workbook has no sheet Readings but {', '.join(sheet.title for sheet in sheets) or 'none'}: "
        f"rename the sheet that holds the readings"
    )


def _rows(sheet: "Worksheet", content: bytes, problems: Problems) -> list[Row]:
    if sheet.max_row * sheet.max_column > MOST_CELLS:
        raise UnreadableFile(
            f"sheet {sheet.title} reaches to row {sheet.max_row} and column {sheet.max_column}, more than "
            f"{MOST_CELLS} cells: delete the empty rows and columns around the table"
        )
    formulas = [cell.coordinate for cells in sheet.iter_rows() for cell in cells if cell.data_type == "f"]
    if formulas:
        sheet = _open(content, stored_values=True)[sheet.title]
        for coordinate in formulas:
            if sheet[coordinate].value is None:
                problems.add(
                    Place(sheet.title, sheet[coordinate].row, sheet[coordinate].column_letter),
                    InputError(
                        "a formula has no stored value: open the file in a spreadsheet program and save it"
                    ),
                )
    return [make_row(number, cells) for number, cells in enumerate(_values(sheet), start=1)]


def _values(sheet: "Worksheet") -> Iterator[tuple[Cell, ...]]:
    for cells in sheet.iter_rows(values_only=True):
        yield tuple(cell if isinstance(cell, Cell) else str(cell) for cell in cells)


def _check_merged(sheet: "Worksheet", heading_row: int, problems: Problems) -> None:
    for merged in sheet.merged_cells.ranges:
        if merged.max_row >= heading_row:
            problems.add(
                Place(sheet.title, merged.min_row),
                InputError(f"the cells {merged.coord} are merged: unmerge them and fill in each one"),
            )


LAYOUT = Layout(
    "workbook", "an .xlsx file: sheet Info with key and value, sheet Readings", _recognises, _read
)
