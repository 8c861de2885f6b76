"""Lots and prepared solutions as plain JSON values."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from typing import TYPE_CHECKING, Any

from calib.report.as_json import plain

if TYPE_CHECKING:
    from calib.bench.prepared_solutions import SolutionRecord

LOT = "calib-lot-1"


def solution_json(way: Sequence[SolutionRecord], made: Iterable[SolutionRecord]) -> dict[str, Any]:
    """What `calib lot show --json` prints: the solution, the way to it, and what was made from it."""
    *before, shown = way
    return {
        "schema": LOT,
        **solution_line_json(shown),
        "prepared_from": [solution_line_json(s) for s in before],
        "prepared_from_it": [solution_line_json(s) for s in made],
    }


def solution_line_json(s: SolutionRecord) -> dict[str, Any]:
    """One lot or solution; ``u`` is the combined standard uncertainty."""
    total = sum(p.relative_u**2 for p in s.parts)
    return {
        "name": s.name,
        "kind": "prepared solution" if s.depth else "standard lot",
        "lot": s.lot,
        "parent": s.parent,
        "preparation": s.preparation or None,
        "value": s.value,
        "u": s.u,
        "unit": s.unit,
        "degrees_of_freedom": plain(s.degrees_of_freedom),
        "parts": [
            {
                "name": p.name,
                "relative_u": p.relative_u,
                "degrees_of_freedom": plain(p.degrees_of_freedom),
                "share": p.relative_u**2 / total if total else None,
            }
            for p in s.parts
        ],
        "prepared_on": plain(s.prepared_on),
        "prepared_by": s.prepared_by,
        "checked_by": s.checked_by,
        "expiry": plain(s.expiry),
    }
