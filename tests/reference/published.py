"""Published and independently computed cases, one JSON file each in `cases/`.

Every file says at its head where its figures come from and which were written from
memory. Nothing in them was computed with calib.
"""

from __future__ import annotations

import json
from collections.abc import Callable
from functools import cache
from pathlib import Path
from typing import Any

import numpy as np

# agree(case, what, value, expected, at_least), see conftest.py
Agree = Callable[..., None]
CASES = Path(__file__).parent / "cases"


@cache
def case(name: str) -> dict[str, Any]:
    return json.loads((CASES / f"{name}.json").read_text(encoding="utf-8"))


def digits(value: float, expected: float) -> float:
    """Agreeing digits: −log10 of the relative difference (absolute where 0 is expected), at most 15."""
    difference = abs(value - expected) / (abs(expected) or 1.0)
    if np.isnan(difference):
        return -np.inf
    return float(min(-np.log10(difference), 15.0)) if difference > 0 else 15.0


def worst_digits(values: Any, expected: Any) -> float:
    pairs = zip(np.atleast_1d(values).ravel(), np.atleast_1d(expected).ravel(), strict=True)
    return min(digits(float(v), float(e)) for v, e in pairs)
