"""Acceptance limits, each with the place it comes from and how it was checked."""

import math
import re
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

_NUMBER = r"\d+(?:\.\d+)?"

INCLUSIVE = 1e-12
"""A limit is inclusive: this relative margin only absorbs the rounding of binary fractions."""


@dataclass(frozen=True, slots=True)
class Limit:
    """A limit, its source (document, edition, section) and how it was checked (one of `CHECKED`).

    A limit that only ``warns`` is shown when it is not kept, and rejects nothing.
    """

    value: float
    source: str
    checked: str
    warns: bool = False

    @property
    def cited(self) -> str:
        """The source as a report prints it, with how far it can be relied on."""
        return self.source if self.checked == "method" else f"{self.source} [{self.checked}]"


class Quantity(StrEnum):
    """What kind of number a limit is."""

    FRACTION = "fraction"
    SHARE = "share"
    COUNT = "count"
    CONCENTRATION = "concentration"
    SCALE = "scale of the noise model"


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
        raise MethodError(f"{key}: the limit {value:g} is not a number of at least 0; correct it", place(key))
    if quantity is Quantity.SHARE and value > 1:
        raise MethodError(
            f"{key}: {value:g} is no share; give a number from 0 to 1, such as 0.75", place(key)
        )
    if quantity is Quantity.COUNT and value != int(value):
        raise MethodError(f"{key}: {value:g} is no count; give a whole number", place(key))


def place(key: str) -> str:
    """Where the setting of a limit stands in the text of a method."""
    return f"acceptance.{key}"


def ratio_of(text: str) -> float | None:
    """Read a fraction as people write it; None where the text is none.

    Examples
    --------
    >>> ratio_of("15 %"), ratio_of("2/3"), ratio_of("some")
    (0.15, 0.6666666666666666, None)
    """
    percent = re.fullmatch(rf"({_NUMBER})\s*%", text.strip())
    if percent:
        return float(percent[1]) / 100
    parts = re.fullmatch(rf"({_NUMBER})\s*/\s*({_NUMBER})", text.strip())
    return float(parts[1]) / float(parts[2]) if parts and float(parts[2]) else None


def read_preset(text: str, model: str | None = None) -> dict[str, Limit]:
    """Read a preset: one TOML table a limit, with `value`, `source` and `checked`.

    Parameters
    ----------
    text : str
        TOML text. A limit may have `warns = true`, and a table `for_model` with the same three
        entries for a response model that has a figure of its own.
    model : str, optional
        Key of the response model whose figures are asked for.

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
    return {key: _limit_of_model(key, table, model) for key, table in tables.items()}


def _limit_of_model(key: str, table: object, model: str | None) -> Limit:
    if not isinstance(table, Mapping):
        return _read_limit(key, table)
    own = table.get("for_model", {})
    plain = {name: entry for name, entry in table.items() if name != "for_model"}
    limits = {name: _read_limit(f"{key}.for_model.{name}", entry) for name, entry in own.items()}
    return limits.get(model or "", _read_limit(key, plain))


def _read_limit(key: str, table: object) -> Limit:
    if not isinstance(table, Mapping) or set(table) - {"warns"} != {"value", "source", "checked"}:
        raise MethodError(f"acceptance preset, {key}: give exactly value, source and checked")
    value, source, checked = table["value"], table["source"], table["checked"]
    ratio = ratio_of(value) if isinstance(value, str) else None
    if ratio is not None:
        value = ratio
    if isinstance(value, bool) or not isinstance(value, int | float):
        raise MethodError(f"acceptance preset, {key}: the value {value!r} is not a number; correct it")
    if not isinstance(source, str) or not source.strip():
        raise MethodError(f"acceptance preset, {key}: name the source of the limit in words")
    if checked not in CHECKED:
        raise MethodError(
            f"acceptance preset, {key}: checked is {checked!r}; allowed are {', '.join(CHECKED)}"
        )
    return Limit(float(value), source, checked, bool(table.get("warns", False)))
