"""The heading of a table of readings: which column holds what, and in which unit."""

import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from calib.errors import MissingColumn, UnknownUnit
from calib.intake.rows import Row, cell_text, shown, word
from calib.intake.units import CONCENTRATION_UNITS, parse_concentration_unit

_FIELD_OF_HEADING = {
    "sample": "sample",
    "label": "sample",
    "role": "role",
    "kind": "role",
    "type": "role",
    "concentration": "concentration",
    "response": "response",
    "replicate": "replicate",
    "dilution": "dilution",
    "position": "position",
    "well": "position",
    "vessel": "position",
    "n": "position",
    "no": "position",
    "time": "time",
    "analyte": "analyte",
    "instrument": "instrument",
    "method": "method",
    "lot": "lot",
    "standard lot": "lot",
    "operator": "operator",
    "internal standard": "internal_standard",
}
_EXAMPLES = {"concentration": "concentration [ug/L]", "response": "response [1] (1 for a bare ratio)"}
_WITH_UNIT = re.compile(r"(?P<name>.*?) ?(?:\[(?P<square>[^\[\]]*)\]|\((?P<round>[^()]*)\))")


@dataclass(frozen=True, slots=True)
class Heading:
    """Heading of one column: its name as written, and its unit where it has one."""

    index: int
    name: str
    unit: str | None


@dataclass(frozen=True, slots=True)
class Columns:
    """The columns of a table by what they hold.

    Attributes
    ----------
    fields : mapping of str to Heading
        Has at least ``sample``, ``role``, ``concentration`` and ``response``.
    analyte : str or None
        Name of the column of concentrations, where that is the name of a substance.
    concentration_unit, response_unit : str
        Units of the two.
    unused : tuple of str
        Headings of columns that hold nothing calib keeps.
    """

    fields: Mapping[str, Heading]
    analyte: str | None
    concentration_unit: str
    response_unit: str
    unused: tuple[str, ...]


def read_heading(index: int, title: str) -> Heading:
    """Split ``name [unit]`` or ``name (unit)``.

    Raises
    ------
    UnknownUnit
        If two units of concentration are written.
    """
    name, unit = _split(title)
    # "(as N)" before the unit belongs to the name; a second unit there does not.
    if unit is not None and _split(name)[1] in CONCENTRATION_UNITS:
        raise UnknownUnit(f"the heading {shown(title)} has two units: keep the right one")
    return Heading(index, name, unit)


def names_fields(row: Row) -> int:
    """Count the cells of a row that are headings of a table of readings."""
    return sum(word(_split(cell_text(cell))[0]) in _FIELD_OF_HEADING for cell in row.cells)


def _split(title: str) -> tuple[str, str | None]:
    spaced = " ".join(title.split())
    match = _WITH_UNIT.fullmatch(spaced)
    if match is None:
        return spaced, None
    return match["name"], (match["square"] or match["round"] or "").strip() or None


def find_columns(heading: Row) -> Columns:
    """Find the columns of a table of readings from its heading row.

    The concentration and the response are named so, or are the only other columns
    with a unit: then the first with a unit of concentration is the concentration.

    Parameters
    ----------
    heading : Row
        The heading row.

    Returns
    -------
    Columns
        Columns by what they hold.

    Raises
    ------
    MissingColumn
        If a column is missing, is there twice, or cannot be told from another.
    UnknownUnit
        If a unit is missing, unknown, or given twice differently.
    """
    headings = [read_heading(i, cell_text(cell)) for i, cell in enumerate(heading.cells) if cell is not None]
    fields: dict[str, Heading] = {}
    others: list[Heading] = []
    for found in headings:
        field = _FIELD_OF_HEADING.get(word(found.name))
        if field is None:
            others.append(found)
        else:
            _add_once(fields, field, found)
    measured = _place_measured(fields, [other for other in others if other.unit is not None])
    for field in ("sample", "role"):
        if field not in fields:
            raise MissingColumn(f"there is no column {field}: add one with that heading")
    analyte = fields["concentration"].name.casefold() if "concentration" in measured else None
    return Columns(
        fields=fields,
        analyte=analyte,
        concentration_unit=parse_concentration_unit(
            _unit(fields["concentration"], _EXAMPLES["concentration"])
        ),
        response_unit=_unit(fields["response"], _EXAMPLES["response"]),
        unused=tuple(other.name for other in others if other not in measured.values()),
    )


def _add_once(fields: dict[str, Heading], field: str, found: Heading) -> None:
    earlier = fields.setdefault(field, found)
    if earlier is found:
        return
    if earlier.unit != found.unit:
        raise UnknownUnit(
            f"column {field} is there twice, in {earlier.unit or 'no unit'} and {found.unit or 'no unit'} "
            f"(columns {earlier.index + 1} and {found.index + 1}): keep one"
        )
    raise MissingColumn(
        f"column {field} is there twice (columns {earlier.index + 1} and {found.index + 1}): keep one"
    )


def _place_measured(fields: dict[str, Heading], candidates: Sequence[Heading]) -> dict[str, Heading]:
    """Fill in the columns that are named after what was measured; return those filled in."""
    missing = [field for field in _EXAMPLES if field not in fields]
    if len(candidates) < len(missing):
        lacking = missing[1] if candidates and _has_concentration_unit(candidates[0]) else missing[0]
        raise MissingColumn(f"there is no column {lacking}: add one with a unit, headed {_EXAMPLES[lacking]}")
    if missing and len(candidates) > len(missing):
        names = ", ".join(shown(candidate.name) for candidate in candidates)
        raise MissingColumn(
            f"{len(candidates)} columns have a unit ({names}) and the {' and the '.join(missing)} cannot be "
            f"told from the others: name it {' and '.join(_EXAMPLES[field] for field in missing)}"
        )
    if (
        len(missing) == 2
        and not _has_concentration_unit(candidates[0])
        and _has_concentration_unit(candidates[1])
    ):
        candidates = candidates[::-1]
    measured = dict(zip(missing, candidates, strict=False))
    fields.update(measured)
    return measured


def _has_concentration_unit(heading: Heading) -> bool:
    try:
        parse_concentration_unit(heading.unit or "")
    except UnknownUnit:
        return False
    return True


def _unit(heading: Heading, example: str) -> str:
    if heading.unit is None:
        raise UnknownUnit(f"column {heading.name} has no unit: write it in the heading, such as {example}")
    return heading.unit
