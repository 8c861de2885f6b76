"""Find what a combined uncertainty rests on: past checks, the standard lot, the method's settings."""

from __future__ import annotations

from collections.abc import Collection, Iterable, Mapping, Sequence
from dataclasses import dataclass, replace
from datetime import datetime, timedelta, timezone

import numpy as np
from sqlalchemy import select
from sqlalchemy.orm import Session

from calib import store as tables
from calib.bench.find import preparation_of
from calib.bench.keeping import curve_of
from calib.bench.method_definition import MethodDefinition
from calib.bench.prepared_solutions import solution_of
from calib.bench.uncertainty_basis import DILUTION, LOT, UncertaintyBasis, basis_from, basis_parts
from calib.curves.curve import Curve
from calib.quantification.between_run import (
    ENOUGH_RUNS,
    FEWEST_RUNS,
    LAST_RUNS,
    CheckedRun,
    CurveScatter,
    between_runs,
    checked_run,
    curve_scatter,
)
from calib.quantification.budget import Component
from calib.quantification.preparation import UncertainLevels

CHECKED_ROLES = ("check", "first-check", "control")


@dataclass(frozen=True, slots=True)
class BasisRequest:
    """Which run the basis is for; ``levels`` are those of its standards, in the method's unit."""

    definition: MethodDefinition
    instrument_id: int
    at: datetime
    lot: tables.StandardLot | None
    prepared: tables.Preparation | None
    levels: tuple[float, ...]
    another_day: bool = False


def find_basis(session: Session, request: BasisRequest) -> UncertaintyBasis:
    """What is known of a run's uncertainty from before it, and in words what is not.

    Past runs are the accepted ones of the same instrument and method that were measured before,
    the last fifty of them.
    """
    curves = _past_curves(session, request)
    checked = _checked_runs(session, curves)
    left_out: list[str] = []
    between = between_runs(list(checked.values()))
    if between is None:
        left_out.append(
            f"between runs: {len(checked)} accepted runs with check standards or controls before this one, "
            f"at least {FEWEST_RUNS} are needed"
        )
    elif len(checked) < ENOUGH_RUNS:
        left_out.append(
            f"provisional: the between-run component rests on {len(checked)} runs, fewer than {ENOUGH_RUNS}"
        )
    lot = _lot_component(session, request, left_out)
    dilution = _dilution(request.definition)
    if dilution is None:
        left_out.append("dilution: the method states no uncertainty of a dilution factor")
    scatter = _scatter(request, list(curves.values()), left_out)
    return UncertaintyBasis(
        relative=tuple(c for c in (between, lot) if c is not None),
        dilution=dilution,
        levels=_levels(request.definition, request.levels),
        scatter=scatter,
        left_out=tuple(left_out),
        runs=tuple(sorted(checked)),
    )


def request_for(
    session: Session,
    definition: MethodDefinition,
    facts: tables.RunFacts,
    levels: Iterable[float],
    at: datetime | None = None,
) -> BasisRequest:
    """Request for a run from the facts of the run its curve belongs to.

    ``at`` is when the samples were measured, where that was in another run.
    """
    moment = at or facts.at
    days = [
        t.astimezone(timezone(timedelta(minutes=facts.offset_minutes))).date() for t in (facts.at, moment)
    ]
    return BasisRequest(
        definition,
        facts.instrument_id,
        facts.at,
        session.get_one(tables.StandardLot, facts.lot_id) if facts.lot_id else None,
        preparation_of(session, facts),
        tuple(levels),
        another_day=days[0] != days[1],
    )


def under_settings(
    basis: UncertaintyBasis, definition: MethodDefinition, levels: Iterable[float]
) -> UncertaintyBasis:
    """A kept basis with what another version of the method states itself."""
    return replace(basis, dilution=_dilution(definition), levels=_levels(definition, levels))


def kept_basis(session: Session, run_id: int) -> UncertaintyBasis | None:
    """The basis a run was quantified on; None for one logged before there was any."""
    return kept_bases(session, (run_id,)).get(run_id)


def kept_bases(session: Session, numbers: Collection[int]) -> dict[int, UncertaintyBasis]:
    """The basis in force of each run that has one."""
    row = tables.UncertaintyBasisRow
    query = select(row).where(row.run_id.in_(numbers), tables.is_current(row))
    return {r.run_id: basis_from(r.components, r.left_out, r.runs) for r in session.scalars(query)}


def keep_basis(session: Session, run_id: int, basis: UncertaintyBasis, *, by: str, at: datetime) -> None:
    """Write down what a run was quantified on, over what it was quantified on before."""
    row = tables.UncertaintyBasisRow
    before = session.scalar(select(row.id).where(row.run_id == run_id, tables.is_current(row)))
    session.add(
        tables.UncertaintyBasisRow(
            run_id=run_id,
            components=basis_parts(basis),
            left_out=list(basis.left_out),
            runs=list(basis.runs),
            by=by,
            at=at,
            supersedes=before,
        )
    )


def _past_curves(session: Session, request: BasisRequest) -> dict[int, Curve]:
    """Curves in force of past accepted runs by number of the run, of the present model."""
    definition = request.definition
    rows = session.execute(
        select(tables.Curve)
        .join(tables.Run, tables.Run.id == tables.Curve.run_id)
        .join(tables.RunFacts, tables.RunFacts.run_id == tables.Run.id)
        .join(tables.Method, tables.Method.id == tables.Run.method_id)
        .join(tables.VerdictRow, tables.VerdictRow.curve_id == tables.Curve.id)
        .outerjoin(tables.RunVoid, tables.RunVoid.run_id == tables.Run.id)
        .where(
            tables.RunFacts.instrument_id == request.instrument_id,
            tables.RunFacts.at < request.at,
            tables.Method.name == definition.name,
            tables.Curve.model == definition.model,
            tables.Curve.converged.is_(True),
            tables.VerdictRow.decision != "rejected",
            tables.RunVoid.id.is_(None),
            tables.is_current(tables.RunFacts),
            tables.is_current(tables.Curve),
        )
        .order_by(tables.RunFacts.at.desc(), tables.Run.id.desc())
        .limit(LAST_RUNS)
    ).scalars()
    found = {row.run_id: curve_of(row, ()) for row in rows}
    return {n: c for n, c in found.items() if c.fixed == dict(definition.fixed) and _finite(c)}


def _finite(curve: Curve) -> bool:
    return bool(np.all(np.isfinite(curve.values)) and np.all(np.isfinite(curve.covariance)))


def _checked_runs(session: Session, curves: Mapping[int, Curve]) -> dict[int, CheckedRun]:
    row = tables.QuantityRow
    query = select(row.run_id, row.role, row.nominal, row.concentration, row.dilution, row.replicates).where(
        row.run_id.in_(curves),
        row.role.in_(CHECKED_ROLES),
        row.position == "inside",
        row.state.in_(("ok", "asymmetric")),
        row.concentration > 0,
        row.nominal > 0,
        tables.is_current(row),
    )
    found: dict[int, list[tuple[str, float, float, int]]] = {}
    for number, role, nominal, value, dilution, n in session.execute(query.order_by(row.id)):
        if value is None or nominal is None:
            continue
        found.setdefault(number, []).append((f"{role} {nominal:g}", nominal / dilution, value / dilution, n))
    return {number: _checked(curves[number], checks) for number, checks in found.items()}


def _checked(curve: Curve, checks: Sequence[tuple[str, float, float, int]]) -> CheckedRun:
    labels, nominal, value, n = zip(*checks, strict=True)
    return checked_run(curve, labels, np.array(nominal), np.array(value), np.array(n, dtype=float))


def _lot_component(session: Session, request: BasisRequest, left_out: list[str]) -> Component | None:
    named = request.prepared or request.lot
    if named is None:
        left_out.append("certified value: no standard lot is named")
        return None
    solution = solution_of(session, named)
    if solution is None:
        left_out.append(f"certified value: lot {named.name} has no value with its U and k")
        return None
    return Component(LOT, solution.relative_u, solution.degrees_of_freedom)


def _dilution(definition: MethodDefinition) -> Component | None:
    u = definition.budget.dilution
    return None if u is None else Component(DILUTION, u)


def _levels(definition: MethodDefinition, concentrations: Iterable[float]) -> UncertainLevels | None:
    u = definition.budget.level_preparation
    if not u:
        return None
    levels = np.unique(np.array(list(concentrations)))
    return UncertainLevels(levels, u**2 * np.eye(levels.size))


def _scatter(request: BasisRequest, curves: Sequence[Curve], left_out: list[str]) -> CurveScatter | None:
    if not request.another_day:
        return None
    scatter = curve_scatter(curves)
    if scatter is None:
        left_out.append(
            f"curve of another day: {len(curves)} accepted curves before this one, at least {FEWEST_RUNS} are needed"
        )
    return scatter
