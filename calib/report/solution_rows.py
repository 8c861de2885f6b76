"""Lots and prepared solutions in words: the tree, and what an uncertainty is made of."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

from calib.report.wording import number, percent, rounded, with_unit

if TYPE_CHECKING:
    from calib.bench.prepared_solutions import SolutionRecord
    from calib.bench.register import LotRecord

HEADINGS = ("Lot or solution", "What it is", "Value", "u", "Expiry", "Prepared", "Checked by")
PART_HEADINGS = ("Part", ">Relative u", ">Share")


def tree_rows(solutions: Sequence[SolutionRecord], lots: Sequence[LotRecord] = ()) -> list[tuple[str, ...]]:
    """One row each, a solution indented below what it was prepared from; ``lots`` give U and k."""
    certificates = {lot.name: lot for lot in lots}
    return [_row(s, certificates.get(s.name) if not s.depth else None) for s in solutions]


def _row(s: SolutionRecord, lot: LotRecord | None) -> tuple[str, ...]:
    value, u = "", ""
    if s.value is not None:
        unit = s.unit or "1"
        if s.u is not None:
            shown, shown_u = rounded(s.value, s.u)
            value, u = with_unit(shown, unit), with_unit(shown_u, unit)
        else:
            value = with_unit(number(s.value), unit)
        if lot is not None and lot.expanded_uncertainty:
            u += f" (U {number(lot.expanded_uncertainty)}, k = {number(lot.coverage_factor)})"
    prepared = f"{s.prepared_on.isoformat()} {s.prepared_by}" if s.prepared_on else ""
    return (
        "  " * s.depth + s.name,
        s.preparation or s.material,
        value,
        u,
        s.expiry.isoformat() if s.expiry else "",
        prepared,
        (s.checked_by or "not checked") if s.depth else "",
    )


def value_in_words(s: SolutionRecord) -> str:
    """Value with its standard uncertainty, for example '10.000 mg/L, standard uncertainty 0.063 mg/L'."""
    if s.value is None:
        return "no certified value"
    unit = s.unit or "1"
    if s.u is None:
        return f"{with_unit(number(s.value), unit)}, no uncertainty stated"
    shown, u = rounded(s.value, s.u)
    return (
        f"{with_unit(shown, unit)}, standard uncertainty {with_unit(u, unit)} ({percent(s.u / s.value, 2)})"
    )


def facts_in_words(s: SolutionRecord) -> tuple[str, ...]:
    """What a person has to know about one lot or solution, a sentence each."""
    if not s.depth:
        return (f"standard lot {s.name}: {s.material}", f"  {value_in_words(s)}")
    checked = f"checked by {s.checked_by}" if s.checked_by else "not checked by a second person yet"
    day = s.prepared_on.isoformat() if s.prepared_on else ""
    return (
        f"prepared solution {s.name}: {s.preparation}",
        f"  {value_in_words(s)}",
        f"  prepared {day} by {s.prepared_by}, {checked}",
        "  its uncertainty is common to every level made from it, and is not reduced by levels or replicates",
    )


def part_rows(s: SolutionRecord) -> list[tuple[str, ...]]:
    """Independent parts of the uncertainty, each with its share of the variance."""
    total = sum(p.relative_u**2 for p in s.parts)
    return [
        (p.name, percent(p.relative_u, 3), percent(p.relative_u**2 / total if total else 0.0))
        for p in s.parts
    ]
