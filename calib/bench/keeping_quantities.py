"""Between quantities and rows: how the results of a run are written to the store and read back."""

from __future__ import annotations

from collections.abc import Sequence

from sqlalchemy import select
from sqlalchemy.orm import Session

from calib import store as tables
from calib.bench.records import QuantityRecord

WITHDRAWN = "withdrawn"


def add_first_quantities(
    session: Session, run_id: int, curve_id: int, quantities: Sequence[QuantityRecord]
) -> None:
    """Write the quantities of a run that has none yet."""
    session.add_all(_quantity_row(run_id, curve_id, q, None) for q in quantities)


def add_quantities(
    session: Session, run_id: int, curve_id: int, quantities: Sequence[QuantityRecord]
) -> None:
    """Write quantities over those of the same run that are in force.

    Each supersedes the one of the same sample; a renamed sample supersedes its old name,
    and a sample that is gone is withdrawn.
    """
    before = {_identity(q): q for q in current_quantities(session, run_id)}
    fresh = [q for q in quantities if (q.sample, q.role, q.dilution, q.nominal) not in before]
    for q in quantities:
        old = before.pop((q.sample, q.role, q.dilution, q.nominal), None)
        if old is not None:
            session.add(_quantity_row(run_id, curve_id, q, old.id))
    gone = iter(before.values())
    for q in fresh:
        old = next(gone, None)
        session.add(_quantity_row(run_id, curve_id, q, old.id if old else None))
    session.add_all(_withdrawn(old, curve_id) for old in gone if WITHDRAWN not in old.flags)


def current_quantities(session: Session, run_id: int) -> Sequence[tables.QuantityRow]:
    """Quantities of a run that are in force, withdrawn ones included, in the order they were written."""
    query = select(tables.QuantityRow).where(
        tables.QuantityRow.run_id == run_id, tables.is_current(tables.QuantityRow)
    )
    return session.scalars(query.order_by(tables.QuantityRow.id)).all()


def quantity_record(row: tables.QuantityRow) -> QuantityRecord:
    """The quantity a row stands for; a value outside the range becomes an estimate."""
    inside = row.position == "inside"
    return QuantityRecord(
        sample=row.sample,
        role=row.role,
        nominal=row.nominal,
        replicates=row.replicates,
        mean_response=row.mean_response,
        concentration=row.concentration if inside else None,
        estimate=None if inside else row.concentration,
        u=row.u,
        k=row.k,
        expanded=row.expanded,
        lower=row.lower,
        upper=row.upper,
        upper_open=row.upper_open,
        confidence=row.confidence,
        kind=row.kind,
        degrees_of_freedom=row.degrees_of_freedom,
        state=row.state,
        position=row.position,
        flags=tuple(row.flags),
        dilution=row.dilution,
        unit=row.unit,
        curve_id=row.curve_id,
        budget=dict(row.budget),
    )


def _identity(row: tables.QuantityRow) -> tuple[str, str, float, float | None]:
    return row.sample, row.role, row.dilution, row.nominal


def _withdrawn(old: tables.QuantityRow, curve_id: int) -> tables.QuantityRow:
    """A row that says of a sample that it is no longer in the run."""
    return tables.QuantityRow(
        run_id=old.run_id,
        curve_id=curve_id,
        sample=old.sample,
        role=old.role,
        nominal=old.nominal,
        replicates=0,
        upper_open=False,
        confidence=old.confidence,
        kind=old.kind,
        state="no-estimate",
        flags=[WITHDRAWN],
        dilution=old.dilution,
        unit=old.unit,
        budget={},
        supersedes=old.id,
    )


def _quantity_row(
    run_id: int, curve_id: int, q: QuantityRecord, supersedes: int | None
) -> tables.QuantityRow:
    return tables.QuantityRow(
        run_id=run_id,
        curve_id=curve_id,
        sample=q.sample,
        role=q.role,
        nominal=q.nominal,
        replicates=q.replicates,
        mean_response=q.mean_response,
        concentration=q.concentration if q.concentration is not None else q.estimate,
        u=q.u,
        k=q.k,
        expanded=q.expanded,
        lower=q.lower,
        upper=q.upper,
        upper_open=q.upper_open,
        confidence=q.confidence,
        kind=q.kind,
        degrees_of_freedom=q.degrees_of_freedom,
        state=q.state,
        position=q.position,
        flags=list(q.flags),
        dilution=q.dilution,
        unit=q.unit,
        budget=q.budget,
        supersedes=supersedes,
    )
