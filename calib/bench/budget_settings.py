"""The [budget] table of a method: uncertainties nobody can read from the records."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass

from calib.errors import MethodError

KEYS = ("dilution", "level_preparation")


@dataclass(frozen=True, slots=True)
class BudgetSettings:
    """Relative standard uncertainties a method states; None where it states none.

    Attributes
    ----------
    dilution : float or None
        Of a dilution factor other than 1.
    level_preparation : float or None
        Of preparing one level of the standards, independent from level to level.
    """

    dilution: float | None = None
    level_preparation: float | None = None


def budget_settings(table: object) -> BudgetSettings:
    """Read and validate the table.

    Raises
    ------
    MethodError
        Naming the key and what is allowed.
    """
    if table is None:
        return BudgetSettings()
    if not isinstance(table, Mapping) or set(table) - set(KEYS):
        raise MethodError(
            f"[budget] knows the keys {' and '.join(KEYS)}, each a relative standard uncertainty"
        )
    return BudgetSettings(**{key: _fraction(table[key], f"budget.{key}") for key in table})


def _fraction(value: object, key: str) -> float:
    number = isinstance(value, int | float) and not isinstance(value, bool)
    if not number or not math.isfinite(value) or not 0 <= value < 1:  # type: ignore[arg-type, operator]
        raise MethodError(f"{key} = {value!r} must be a fraction of at least 0 and below 1, such as 0.006")
    return float(value)  # type: ignore[arg-type]
