"""What a well of a plate plan may say."""

import re
from collections.abc import Iterator
from dataclasses import dataclass

from calib.errors import InputError, UnknownUnit
from calib.intake.numbers import parse_concentration, parse_dilution
from calib.intake.parsed import Role
from calib.intake.roles import sample_name
from calib.intake.rows import Cell, cell_text, shown

# C is a concentration, LABEL any text, D a dilution factor.
_GRAMMAR = (
    "blank [LABEL], zero, std C, anchor C, first-check C [LABEL], check C [LABEL], control C [LABEL], "
    "carry-over, unk LABEL [xD]"
)
_LEVEL, _LABEL = r"\s+(?P<level>\S+)", r"(?:\s+(?P<label>.+))?"
_FORMS = tuple(
    (role, re.compile(form, re.IGNORECASE))
    for role, form in (
        (Role.BLANK, rf"blank{_LABEL}"),
        (Role.ZERO, r"zero"),
        (Role.STANDARD, rf"std{_LEVEL}"),
        (Role.ANCHOR, rf"anchor{_LEVEL}"),
        (Role.FIRST_CHECK, rf"first[-\s]check{_LEVEL}{_LABEL}"),
        (Role.CHECK, rf"check{_LEVEL}{_LABEL}"),
        (Role.CONTROL, rf"control{_LEVEL}{_LABEL}"),
        (Role.CARRY_OVER, r"carry[-\s]over"),
        (Role.UNKNOWN, r"unk\s+(?P<label>.+?)(?:\s+x(?P<dilution>[-+.,\d]\S*))?"),
    )
)


@dataclass(frozen=True, slots=True)
class Planned:
    """What a well holds."""

    role: Role
    sample: str
    concentration: float | None
    dilution: float


def planned_numbers(cell: Cell) -> Iterator[str]:
    """Give the number texts of a well: its concentration and its dilution."""
    form = _form(cell)
    if form is not None:
        parts = form[1].groupdict()
        yield from (parts[part] for part in ("level", "dilution") if parts.get(part))


def parse_planned(cell: Cell, sign: str) -> Planned:
    """Read a well of the plan.

    Parameters
    ----------
    cell : Cell
        Text such as ``std 0.05`` or ``unk L-0301 x10``.
    sign : str
        Decimal sign of the file.

    Raises
    ------
    InputError
        If the well says nothing known, or a number in it is none.
    """
    form = _form(cell)
    if form is None:
        raise InputError(
            f"{shown(cell)} does not say what the well holds: write {_GRAMMAR}, or leave it empty"
        )
    role, parts = form[0], form[1].groupdict()
    level, label = parse_concentration(parts.get("level"), sign), parts.get("label")
    if level is not None and label is not None and "/" in label:
        raise UnknownUnit(f"{shown(cell)} has a unit in the well: give it in the head, as concentration unit")
    return Planned(role, sample_name(label, role, level), level, parse_dilution(parts.get("dilution"), sign))


def _form(cell: Cell) -> tuple[Role, re.Match[str]] | None:
    for role, form in _FORMS:
        match = form.fullmatch(" ".join(cell_text(cell).split()))
        if match is not None:
            return role, match
    return None
