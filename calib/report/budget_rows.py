"""The uncertainty budget of a sample as rows, for screen, report and JSON."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from calib.report.wording import MISSING, number, percent, with_unit

if TYPE_CHECKING:
    from calib.bench.records import Evaluation, QuantityRecord, RunRecord

OWN = ("repeatability of the reading", "curve")
HEADINGS = ("Component", ">u", ">Relative u", ">Degrees of freedom", ">Share")


@dataclass(frozen=True, slots=True)
class BudgetLine:
    """One component: standard uncertainty, degrees of freedom, and share of the variance."""

    component: str
    u: float
    degrees_of_freedom: float
    share: float


@dataclass(frozen=True, slots=True)
class SampleBudget:
    """Budget of one sample for a table: its cells by component, then u, ν, k and U."""

    sample: str
    kind: str
    shares: tuple[str, ...]
    u: str
    degrees_of_freedom: str
    k: str
    expanded: str


def budget_lines(q: QuantityRecord, evaluation: Evaluation) -> tuple[BudgetLine, ...]:
    """Components of a sample, reading and curve first; empty where no u is given."""
    total = sum(u**2 for u in q.budget.values())
    nu = float(evaluation.curve.coverage_freedom)
    return tuple(
        BudgetLine(name, u, evaluation.basis.degrees_of_freedom(name, nu), u**2 / total if total else 0.0)
        for name, u in sorted(
            q.budget.items(), key=lambda item: (item[0] not in OWN, item[0] == "curve", item[0])
        )
    )


def budget_json(q: QuantityRecord, evaluation: Evaluation) -> list[dict[str, Any]]:
    """The same with full precision; infinite degrees of freedom are null."""
    return [
        {
            "component": line.component,
            "u": line.u,
            "degrees_of_freedom": line.degrees_of_freedom if math.isfinite(line.degrees_of_freedom) else None,
            "share": line.share,
        }
        for line in budget_lines(q, evaluation)
    ]


def line_rows(q: QuantityRecord, evaluation: Evaluation) -> list[tuple[str, ...]]:
    """One row a component, and the combined one last."""
    value = q.concentration or q.estimate
    rows = [
        (
            line.component,
            with_unit(number(line.u, 2), q.unit),
            percent(line.u / value if value else None, 2),
            freedom_text(line.degrees_of_freedom),
            percent(line.share),
        )
        for line in budget_lines(q, evaluation)
    ]
    combined = (
        q.kind,
        with_unit(number(q.u, 2), q.unit),
        percent(q.u / value if value and q.u is not None else None, 2),
        freedom_text(q.degrees_of_freedom if q.degrees_of_freedom is not None else math.inf),
        percent(1.0),
    )
    return [*rows, combined] if rows else []


def sample_budgets(record: RunRecord) -> tuple[tuple[str, ...], tuple[SampleBudget, ...]]:
    """Names of the components of a run's unknowns, and one row a sample that has a budget."""
    found = [q for q in record.evaluation.quantities if q.role == "unknown" and q.concentration is not None]
    found = [q for q in found if q.budget]
    lines = (line for q in found for line in budget_lines(q, record.evaluation))
    names = tuple(dict.fromkeys(line.component for line in lines))
    return names, tuple(_sample(q, names, record.evaluation) for q in found)


def _sample(q: QuantityRecord, names: tuple[str, ...], evaluation: Evaluation) -> SampleBudget:
    shares = {line.component: percent(line.share, 0) for line in budget_lines(q, evaluation)}
    return SampleBudget(
        q.sample,
        q.kind,
        tuple(shares.get(name, MISSING) for name in names),
        number(q.u, 2),
        freedom_text(q.degrees_of_freedom if q.degrees_of_freedom is not None else math.inf),
        MISSING if q.k is None else f"{q.k:.2f}",
        number(q.expanded, 2),
    )


def freedom_text(nu: float) -> str:
    """Degrees of freedom; those of what is known are infinite."""
    return "∞" if math.isinf(nu) else number(nu, 3)


def left_out_in_words(evaluation: Evaluation) -> tuple[str, ...]:
    """What the uncertainty does not include, a sentence each."""
    basis = evaluation.basis
    if not (basis.left_out or basis.runs):
        return ()
    if basis.combined:
        return tuple(f"not in it: {s}" if not s.startswith("provisional") else s for s in basis.left_out)
    return tuple(f"curve only: {s}" for s in basis.left_out if s.startswith("between"))
