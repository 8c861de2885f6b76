"""Layout `plate-grid`: a head, then a grid of what each well holds and a grid of its readings."""

import re
from collections.abc import Iterator, Sequence
from dataclasses import dataclass

from calib.errors import InputError, MissingColumn, UnknownUnit
from calib.intake.extract import Extract, Layout, Source
from calib.intake.facts import Facts, pairs_from_rows, read_facts
from calib.intake.numbers import NumberText, decimal_sign, parse_response
from calib.intake.parsed import ParsedReading, ParsedRun, Place
from calib.intake.plate_plan import parse_planned, planned_numbers
from calib.intake.problems import Problems
from calib.intake.rows import Cell, Row, cell_text, guess_separator, shown, split_rows, word
from calib.intake.understood import count, number_style, unused_keys
from calib.intake.units import parse_concentration_unit

_PLAN, _READINGS = "plan", "readings"
_GRID_LINE = re.compile(r"^ *\"?(?:plan|readings)\"? *[,;\t] *\"?[0-9].*$", re.IGNORECASE | re.MULTILINE)


@dataclass(frozen=True, slots=True)
class _Well:
    name: str
    cell: Cell
    row: int
    column: str

    def problem_place(self) -> Place:
        return Place(row=self.row, column=f"{self.column}, well {self.name}")


@dataclass(frozen=True, slots=True)
class _Grid:
    row: int
    letters: tuple[str, ...]
    columns: tuple[str, ...]
    wells: dict[str, _Well]


def _recognises(source: Source) -> bool:
    return source.text is not None and _GRID_LINE.search(source.text) is not None


def _read(source: Source) -> Extract:
    text = source.require_text()
    grid_line = _GRID_LINE.search(text)
    separator = guess_separator(grid_line[0] if grid_line else text)
    rows = split_rows(text, separator)
    problems = Problems()
    plan, readings = _read_grid(rows, _PLAN, problems), _read_grid(rows, _READINGS, problems)
    problems.raise_any()
    _check_shapes(plan, readings)
    head = [row for row in rows if row.number < min(plan.row, readings.row)]
    facts, unused = read_facts(pairs_from_rows(head), problems)
    sign = decimal_sign(_number_texts(plan, readings), separator)
    run = _run(facts, _wells(plan, readings, sign, problems), problems)
    problems.raise_any()
    return Extract((run,), (*unused_keys(unused), number_style(separator, sign), *_unplanned(plan, readings)))


def _read_grid(rows: Sequence[Row], name: str, problems: Problems) -> _Grid:
    start = next((i for i, row in enumerate(rows) if row.cells and word(row.cells[0]) == name), None)
    if start is None:
        raise MissingColumn(
            f"there is no grid headed {name}: add it, with the columns 1, 2, 3 ... beside that word"
        )
    heading = rows[start]
    columns = tuple(cell_text(cell) for cell in heading.cells[1:] if cell is not None)
    if not columns or not all(column.isdecimal() for column in columns) or len(set(columns)) < len(columns):
        raise MissingColumn(
            f"row {heading.number}: the columns of the grid {name} are not 1, 2, 3 ... each once: "
            f"correct them"
        )
    lines: dict[str, Row] = {}
    for row in rows[start + 1 :]:
        if not row.filled or word(row.cells[0]) in (_PLAN, _READINGS):
            break
        problems.attempt(Place(row=row.number), _add_line, lines, row, len(columns))
    wells = (
        _Well(f"{letter}{column}", row.cell(index), row.number, column)
        for letter, row in lines.items()
        for index, column in enumerate(columns, start=1)
    )
    return _Grid(heading.number, tuple(lines), columns, {well.name: well for well in wells})


def _add_line(lines: dict[str, Row], row: Row, width: int) -> None:
    letter = cell_text(row.cells[0]).upper()
    if not re.fullmatch(r"[A-Z]{1,2}", letter):
        raise InputError(
            f"{shown(row.cells[0])} is no row letter of a plate: begin each line of a grid with A, B, C ..."
        )
    if letter in lines:
        raise InputError(
            f"row letter {letter} is there twice, first in row {lines[letter].number}: correct one"
        )
    if any(cell is not None for cell in row.cells[width + 1 :]):
        raise InputError(
            f"line {letter} has more cells than the grid has columns: correct the line or the columns"
        )
    lines[letter] = row


def _check_shapes(plan: _Grid, readings: _Grid) -> None:
    if (plan.letters, plan.columns) == (readings.letters, readings.columns):
        return
    raise InputError(
        f"row {readings.row}: the readings are {_shape(readings)}, but the plan in row {plan.row} is "
        f"{_shape(plan)}: give both grids the same rows and columns"
    )


def _shape(grid: _Grid) -> str:
    lines = f"{grid.letters[0]} to {grid.letters[-1]}" if grid.letters else "no rows"
    return f"{len(grid.letters)} x {len(grid.columns)} ({lines}, {grid.columns[0]} to {grid.columns[-1]})"


def _number_texts(plan: _Grid, readings: _Grid) -> Iterator[NumberText]:
    for well in plan.wells.values():
        for number in planned_numbers(well.cell):
            yield NumberText(number, well.problem_place())
    for well in readings.wells.values():
        yield NumberText(cell_text(well.cell), well.problem_place())


def _wells(plan: _Grid, readings: _Grid, sign: str, problems: Problems) -> Iterator[ParsedReading]:
    for name, planned in plan.wells.items():
        if planned.cell is None:
            continue
        measured = readings.wells[name]
        what = problems.attempt(planned.problem_place(), parse_planned, planned.cell, sign)
        response = problems.attempt(measured.problem_place(), parse_response, measured.cell, sign)
        if what is None or response is None:
            continue
        yield ParsedReading(
            sample=what.sample,
            role=what.role,
            concentration=what.concentration,
            response=response.value,
            response_text=response.text,
            absent_cause=response.absent_cause,
            replicate=None,
            dilution=what.dilution,
            position=name,
            at=None,
            place=Place(row=measured.row, column=measured.column),
        )


def _run(facts: Facts, wells: Iterator[ParsedReading], problems: Problems) -> ParsedRun:
    readings = tuple(wells)
    unit = problems.attempt(Place(), _concentration_unit, facts)
    if facts.response_unit is None:
        problems.add(
            Place(), UnknownUnit("the head has no response unit: add 'response unit,1' (1 for a bare ratio)")
        )
    if not readings:
        problems.add(Place(), InputError("the plan names no well that was read: fill in the plan"))
    return ParsedRun(
        analyte=facts.analyte,
        instrument=facts.instrument,
        serial=facts.serial,
        method=facts.method,
        at=facts.at,
        operator=facts.operator,
        lot=facts.lot,
        concentration_unit=unit or "",
        response_unit=facts.response_unit or "",
        readings=readings,
    )


def _concentration_unit(facts: Facts) -> str:
    if facts.concentration_unit is None:
        raise UnknownUnit("the head has no concentration unit: add a line such as 'concentration unit,ug/L'")
    return parse_concentration_unit(facts.concentration_unit)


def _unplanned(plan: _Grid, readings: _Grid) -> Iterator[str]:
    skipped = [
        name
        for name, well in readings.wells.items()
        if well.cell is not None and plan.wells[name].cell is None
    ]
    if skipped:
        named = ", ".join(skipped[:12]) + (", ..." if len(skipped) > 12 else "")
        yield f"{count(len(skipped), 'well')} with a reading but no plan skipped: {named}."


LAYOUT = Layout(
    "plate-grid", "a head, then a grid 'plan' and a grid 'readings' of the same shape", _recognises, _read
)
