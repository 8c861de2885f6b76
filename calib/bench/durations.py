"""Lengths of time as people write them."""

from __future__ import annotations

import re

from calib.errors import InputError

DURATION = re.compile(r"^\s*(\d+(?:\.\d+)?)\s*(min|h|d)\s*$")
HOURS = {"min": 1.0 / 60.0, "h": 1.0, "d": 24.0}
LONGEST_HOURS = 87660.0


def hours_of(text: object, what: str) -> float:
    """Hours of a text such as '90 min', '24 h' or '7 d'.

    Raises
    ------
    InputError
        Naming what was given.
    """
    match = DURATION.match(text) if isinstance(text, str) else None
    if match is None or float(match[1]) == 0:
        raise InputError(f"{what} = {text!r} must be a time such as '90 min', '24 h' or '7 d'")
    hours = float(match[1]) * HOURS[match[2]]
    if hours > LONGEST_HOURS:
        raise InputError(f"{what} = {text!r} is longer than ten years; correct it")
    return hours
