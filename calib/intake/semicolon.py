"""Layout `semicolon`: lines of ``Key;Value``, then a table of readings, decimal comma."""

from calib.intake.extract import Extract, Layout, Source
from calib.intake.facts import is_fact, pairs_from_rows, read_facts
from calib.intake.problems import Problems
from calib.intake.readings import Head, read_table
from calib.intake.rows import first_line, first_table_row, split_rows
from calib.intake.understood import unused_keys

_SEPARATOR = ";"


def _recognises(source: Source) -> bool:
    if source.text is None:
        return False
    first = first_line(source.text)
    return _SEPARATOR in first and is_fact(first.split(_SEPARATOR)[0].strip().strip('"'))


def _read(source: Source) -> Extract:
    rows = split_rows(source.require_text(), _SEPARATOR)
    problems = Problems()
    start = first_table_row(rows)
    facts, unused = read_facts(pairs_from_rows(rows[:start]), problems)
    extract = read_table(rows[start:], Head(facts, separator=_SEPARATOR), problems)
    return Extract(extract.runs, unused_keys(unused) + extract.notes)


LAYOUT = Layout(
    "semicolon", "lines of 'Key;Value', then one row a reading; semicolons, decimal comma", _recognises, _read
)
