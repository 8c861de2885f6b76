"""Layout `header-block`: lines of ``# key: value``, then a table of readings."""

from calib.errors import UnreadableFile
from calib.intake.extract import Extract, Layout, Source
from calib.intake.facts import Pair, read_facts
from calib.intake.parsed import Place
from calib.intake.problems import Problems
from calib.intake.readings import Head, read_table
from calib.intake.rows import Row, guess_separator, split_rows
from calib.intake.understood import unused_keys


def _recognises(source: Source) -> bool:
    return source.text is not None and source.text.lstrip().startswith("#")


def _read(source: Source) -> Extract:
    lines = source.require_text().split("\n")
    table = next(
        (i for i, line in enumerate(lines) if line.strip() and not line.lstrip().startswith("#")), None
    )
    if table is None:
        raise UnreadableFile("there is a header but no table of readings below it: export the file again")
    problems = Problems()
    facts, unused = read_facts(_pairs(lines[:table]), problems)
    separator = guess_separator(lines[table])
    rows = [Row(row.number + table, row.cells) for row in split_rows("\n".join(lines[table:]), separator)]
    extract = read_table(rows, Head(facts, separator=separator), problems)
    return Extract(extract.runs, unused_keys(unused) + extract.notes)


def _pairs(lines: list[str]) -> list[Pair]:
    pairs = []
    for number, line in enumerate(lines, start=1):
        # A spreadsheet program that saved the file again filled each line up with separators.
        key, colon, value = line.strip().lstrip("#").rstrip(",;\t").partition(":")
        if colon:
            pairs.append(Pair(key.strip(), value.strip() or None, Place(row=number)))
    return pairs


LAYOUT = Layout(
    "header-block", "lines of '# key: value', then one row a reading; comma separated", _recognises, _read
)
