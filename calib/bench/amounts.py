"""Concentrations as a method writes them: a number with its unit, turned into the method's own unit."""

from __future__ import annotations

import math
import re

from calib.errors import MethodError, UnknownUnit
from calib.intake import conversion_factor, parse_concentration_unit

_AMOUNT = re.compile(r"^\s*(?P<number>[+-]?\d+(?:\.\d+)?(?:[eE][+-]?\d+)?)\s*(?P<unit>\S.*?)\s*$")


def amount_in(text: str, unit: str, key: str) -> float:
    """Read an amount such as ``"0.1 mg/L"`` in another unit.

    Parameters
    ----------
    text : str
    unit : str
        Unit asked for.
    key : str
        Setting that is read, for messages.

    Raises
    ------
    MethodError
        When the text is no number with a unit, or the unit cannot be turned into the other.
    """
    found = _AMOUNT.match(text)
    if found is None:
        raise MethodError(
            f'{key} = {text!r} must be a finite number with its unit, such as "0.1 {unit}"', key
        )
    try:
        value = float(found["number"]) * conversion_factor(parse_concentration_unit(found["unit"]), unit)
    except UnknownUnit as unknown:
        raise MethodError(f"{key} = {text!r}: {unknown}", key) from unknown
    if not math.isfinite(value):
        raise MethodError(f"{key} = {text!r} is too large; correct it", key)
    return value
