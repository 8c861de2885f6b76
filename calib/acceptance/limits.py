"""Acceptance limits, each with the place it comes from and how it was checked."""

import math
import tomllib
from collections.abc import Mapping
from dataclasses import dataclass
from enum import StrEnum

from calib.errors import MethodError

CHECKED = ("verified", "second-hand", "from memory", "common practice", "method")
"""How a limit was compared with its source.

verified: read in the source's own text; second-hand: read in a text that quotes it;
from memory: not compared, to be compared with the controlled copy before use;
common practice: no source claimed; method: set by the laboratory's own method.
"""

INCLUSIVE = 1e-12
"""A limit is inclusive: this relative margin only absorbs the rounding of binary fractions."""


@dataclass(frozen=True, slots=True)
class Limit:
    """A limit, its source (document, edition, section) and how it was checked (one of `CHECKED`)."""

    value: float
    source: str
    checked: str

    @property
    def cited(self) -> str:
        """The source as a report prints it, with how far it can be relied on."""
        return self.source if self.checked == "method" else f"{self.source} [{self.checked}]"


class Quantity(StrEnum):
    """What kind of number a limit is."""

    FRACTION = "fraction"
    SHARE = "share"
    COUNT = "count"
    AMOUNT = "amount"


def within(value: float, limit: float) -> bool:
    """Whether abs(value) is at most the limit; never so for nan."""
    return abs(value) <= limit * (1 + INCLUSIVE)


def at_most(value: float, limit: float) -> bool:
    """Whether the value, whatever its size below zero, is at most the limit; never so for nan."""
    return value <= limit * (1 + INCLUSIVE)


def at_least(value: float, limit: float) -> bool:
    """Whether the value is at least the limit; never so for nan."""
    return value >= limit * (1 - INCLUSIVE)


def check_value(key: str, limit: Limit, quantity: Quantity) -> None:
    """Refuse a limit that is no possible value of its quantity.

    Raises
    ------
    MethodError
        The limit is not a finite number of at least zero, a share is above 1, or a count is not whole.
    """
    value = limit.value
    if not (math.isfinite(value) and value >= 0):
        raise MethodError(f"{key}: the limit {value:g} is not a number of at least 0; correct it")
    if quantity is Quantity.SHARE and value > 1:
        raise MethodError(f"{key}: {value:g} is no share; give a number from 0 to 1, such as 0.75")
    if quantity is Quantity.COUNT and value != int(value):
        raise MethodError(f"{key}: {value:g} is no count; give a whole number")


def read_preset(text: str) -> dict[str, Limit]:
    """Read a preset: one TOML table a limit, with `value`, `source` and `checked`.

    Parameters
    ----------
    text : str
        TOML text.

    Returns
    -------
    dict of str to Limit
        In the order of the text.

    Raises
    ------
    MethodError
        The text is no TOML, or a limit lacks one of the three entries or has a wrong one.
    """
    try:
        tables = tomllib.loads(text)
    except tomllib.TOMLDecodeError as broken:
        raise MethodError(f"acceptance preset: not readable as TOML ({broken}); correct the text") from broken
    return {key: _read_limit(key, table) for key, table in tables.items()}


def _read_limit(key: str, table: object) -> Limit:
    if not isinstance(table, Mapping) or set(table) != {"value", "source", "checked"}:
        raise MethodError(f"acceptance preset, {key}: give exactly value, source and checked")
    value, source, checked = table["value"], table["source"], table["checked"]
    if isinstance(value, bool) or not isinstance(value, int | float):
        raise MethodError(f"acceptance preset, {key}: the value {value!r} is not a number; correct it")
    if not isinstance(source, str) or not source.strip():
        raise MethodError(f"acceptance preset, {key}: name the source of the limit in words")
    if checked not in CHECKED:
        raise MethodError(
            f"acceptance preset, {key}: checked is {checked!r}; allowed are {', '.join(CHECKED)}"
        )
    return Limit(float(value), source, checked)
