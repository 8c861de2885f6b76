"""Role words, what each role needs, and the rules that hold for readings of every layout."""

from calib.errors import InputError
from calib.intake.parsed import ParsedReading, Place, Role
from calib.intake.problems import Problems
from calib.intake.rows import Cell, shown, word

_LEVELLED = {Role.STANDARD, Role.ANCHOR, Role.FIRST_CHECK, Role.CHECK, Role.CONTROL}
_WITHOUT_ANALYTE = {Role.BLANK, Role.ZERO, Role.CARRY_OVER}


def parse_role(cell: Cell) -> Role:
    """Read a role word in any case, with spaces or hyphens.

    Raises
    ------
    InputError
        If it is no role.
    """
    try:
        return Role(word(cell).replace(" ", "-"))
    except ValueError:
        raise InputError(f"{shown(cell)} is no role: use one of {', '.join(Role)}") from None


def check_level(role: Role, concentration: float | None) -> None:
    """Refuse a concentration that does not go with the role.

    Raises
    ------
    InputError
        If a standard, check or control has none, or a blank has one above 0.
    """
    if role in _LEVELLED and concentration is None:
        raise InputError(f"a {role} needs its concentration: fill it in")
    if role in _WITHOUT_ANALYTE and concentration:
        raise InputError(
            f"a {role} has no concentration, but {concentration:g} is given: "
            f"leave it empty or correct the role"
        )


def sample_name(text: str | None, role: Role, concentration: float | None) -> str:
    """Return the name of a sample; one without a name is called after its role and level.

    Raises
    ------
    InputError
        If it is an unknown, which only the file can name.
    """
    if text:
        return text
    if role is Role.UNKNOWN:
        raise InputError("an unknown has no sample name: fill it in")
    return role.value if concentration is None else f"{role} {concentration:.15g}"


def check_positions(readings: list[ParsedReading], problems: Problems) -> None:
    """Add a problem for each reading of a run whose position and replicate were there before."""
    first: dict[tuple[str, int | None], Place] = {}
    for reading in readings:
        if reading.position is None:
            continue
        earlier = first.setdefault((reading.position, reading.replicate), reading.place)
        if earlier is not reading.place:
            problems.add(
                Place(reading.place.sheet, reading.place.row),
                InputError(
                    f"position {shown(reading.position)} is there twice, first in row {earlier.row}: "
                    f"correct one, or number them as replicates"
                ),
            )
