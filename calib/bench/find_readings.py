"""Find the readings of a run that a person means."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import replace

from calib.bench.records import Measured
from calib.errors import InputError

FITTED_ROLES = ("standard", "anchor", "blank", "zero")


def find_readings(readings: Iterable[Measured], name: str) -> list[Measured]:
    """Readings a person means: a position ('B7'), a number in the file ('#12'), or a sample name.

    Raises
    ------
    InputError
        When no reading has that name.
    """
    rows = list(readings)
    if name.startswith("#"):
        found = [r for r in rows if f"#{r.key}" == name]
    else:
        found = [r for r in rows if r.position == name] or [r for r in rows if r.sample == name]
    if not found:
        raise InputError(
            f"no reading '{name}' in this run; give a position, a sample name, or #number in the file"
        )
    return found


def with_exclusions(
    runs: Sequence[Sequence[Measured]], exclusions: Iterable[tuple[str, str]]
) -> list[tuple[Measured, ...]]:
    """Readings of the runs of one file, those named left out of the fit with their reason.

    Raises
    ------
    InputError
        When no run has such a reading, it is not fitted, or there is no reason.
    """
    changed = [tuple(run) for run in runs]
    for name, reason in exclusions:
        if not reason.strip():
            raise InputError(f"leaving out '{name}' before the fit needs a reason in words")
        keys = {r.key for r in find_readings([r for run in runs for r in run], name)}
        changed = [tuple(_excluded(r, name, reason) if r.key in keys else r for r in run) for run in changed]
    return changed


def _excluded(reading: Measured, name: str, reason: str) -> Measured:
    if reading.role not in FITTED_ROLES:
        raise InputError(f"'{name}' is no standard but {reading.role}; only what is fitted is excluded")
    return replace(reading, excluded=reason)
