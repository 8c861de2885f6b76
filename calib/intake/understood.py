"""Sentences for the preview: what was understood of a file."""

from collections import Counter
from collections.abc import Iterator, Sequence

from calib.intake.numbers import SIGN_NAMES
from calib.intake.parsed import ParsedReading, ParsedRun, Role
from calib.intake.rows import SEPARATORS

_SINGULARS = {Role.CARRY_OVER: "carry-over blank", Role.ZERO: "zero standard"}
_PLACES_NAMED = 8
_NEED_NOT_BE_SAID = ("analyte", "serial", "operator")


def unused_keys(keys: Sequence[str]) -> tuple[str, ...]:
    """Say which keys of a head were not used."""
    return (f"Header lines not used: {', '.join(keys)}.",) if keys else ()


def number_style(separator: str, sign: str) -> str:
    """Say how cells are separated and numbers are written."""
    return f"Cells separated by {SEPARATORS[separator]}, decimal {SIGN_NAMES[sign]}."


def describe_runs(runs: Sequence[ParsedRun]) -> Iterator[str]:
    """Say for each run where it comes from, what it holds and what is absent."""
    for number, run in enumerate(runs, start=1):
        lead = f"Run {number} of {len(runs)}: " if len(runs) > 1 else ""
        yield lead + _origin(run)
        yield f"Concentration in {run.concentration_unit}, response in {run.response_unit}."
        yield f"{count(len(run.readings), 'reading')}: {_roles(run.readings)}."
        yield from _absent(run.readings)


def _origin(run: ParsedRun) -> str:
    facts = (
        ("analyte", run.analyte),
        ("instrument", run.instrument),
        ("serial", run.serial),
        ("method", run.method),
        ("started", _start(run)),
        ("operator", run.operator),
        ("standard lot", run.lot),
    )
    said = ", ".join(f"{name} {value}" for name, value in facts if value is not None)
    unsaid = ", ".join(name for name, value in facts if value is None and name not in _NEED_NOT_BE_SAID)
    known = f"The file says {said}." if said else "The file says nothing of its origin."
    return f"{known} It does not say: {unsaid}." if said and unsaid else known


def _start(run: ParsedRun) -> str | None:
    if run.at is None:
        return None
    return f"{run.at:%Y-%m-%d %H:%M} " + (
        "(local time, no offset)" if run.at.tzinfo is None else f"{run.at:%z}"
    )


def _roles(readings: Sequence[ParsedReading]) -> str:
    counts = Counter(reading.role for reading in readings)
    return ", ".join(_role_count(role, counts[role]) for role in Role if counts[role])


def _role_count(role: Role, number: int) -> str:
    return count(number, _SINGULARS.get(role, role.value.replace("-", " ")))


def _absent(readings: Sequence[ParsedReading]) -> Iterator[str]:
    causes: dict[str, list[str]] = {}
    for reading in readings:
        if reading.absent_cause is not None:
            position = f"position {reading.position}, " if reading.position else ""
            causes.setdefault(reading.absent_cause, []).append(f"{position}row {reading.place.row}")
    for cause, where in causes.items():
        named = "; ".join(where[:_PLACES_NAMED]) + ("; ..." if len(where) > _PLACES_NAMED else "")
        yield f"{count(len(where), 'reading')} absent: {cause} ({named})."


def count(number: int, noun: str) -> str:
    """Say a number of things."""
    return f"{number} {noun}{'' if number == 1 else 's'}"
