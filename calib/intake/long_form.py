"""Layout `long-form`: one row a reading under one heading row; may hold several runs."""

from calib.errors import InputError, UnreadableFile
from calib.intake.extract import Extract, Layout, Source
from calib.intake.facts import Facts
from calib.intake.problems import Problems
from calib.intake.readings import Head, read_table
from calib.intake.rows import first_line, guess_separator, split_rows
from calib.intake.table import names_fields

_ENOUGH_NAMES = (
    2  # a heading row with a column too few is still known as one, so that the missing one is named
)


def _recognises(source: Source) -> bool:
    if source.text is None:
        return False
    line = first_line(source.text)
    try:
        heading = split_rows(line, guess_separator(line))
    except InputError:
        return False
    return bool(heading) and names_fields(heading[0]) >= _ENOUGH_NAMES


def _read(source: Source) -> Extract:
    text = source.require_text()
    separator = guess_separator(first_line(text))
    rows = split_rows(text, separator)
    start = next((index for index, row in enumerate(rows) if row.filled), None)
    if start is None:
        raise UnreadableFile("there are separators but no cell with anything in it: export the file again")
    return read_table(rows[start:], Head(Facts(), separator=separator), Problems())


LAYOUT = Layout(
    "long-form",
    "one row a reading, columns in any order, units in the headings; text or pasted",
    _recognises,
    _read,
)
