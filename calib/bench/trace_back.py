"""From one reported quantity back to curve, standards, certificate, original file, people and versions."""

from __future__ import annotations

from collections.abc import Mapping

from sqlalchemy import func, select
from sqlalchemy.orm import Session

from calib import store as tables
from calib.bench.find import LARGEST_KEY, facts_of
from calib.bench.keeping_quantities import WITHDRAWN
from calib.bench.review_state import review_state
from calib.bench.trace_records import Trace, Tracing
from calib.bench.traced_rows import add_provenance, in_words, traced_row
from calib.errors import InputError, NotFound

SAMPLE_RUN = 4


def trace_back(store: tables.Store, sample: str, *, run: int | None = None) -> Trace:
    """Everything behind the quantities of a sample, superseded versions included.

    Parameters
    ----------
    sample : str
        Name of the sample, or '#' with the number of one quantity.
    run : int, optional
        The run it was measured in; needed where there are several.

    Raises
    ------
    NotFound
        When there is no such quantity.
    InputError
        When the sample was measured in several runs and none is named.
    """
    head = store.head()
    with store.reading() as session:
        rows = _quantities(session, sample, run)
        tracing = Tracing()
        for row in rows:
            _add_quantity(session, tracing, row)
        return tracing.finished(f"result of {sample}", head)


def _quantities(session: Session, sample: str, run: int | None) -> list[tables.QuantityRow]:
    row = tables.QuantityRow
    if sample.startswith("#") and sample[1:].isdecimal():
        found = [q] if (q := session.get(row, min(int(sample[1:]), LARGEST_KEY))) else []
    else:
        query = select(row).where(row.sample == sample, tables.is_current(row)).order_by(row.id)
        found = [q for q in session.scalars(query) if WITHDRAWN not in q.flags]
    if run is not None:
        found = [q for q in found if q.run_id == run]
    if not found:
        where = f" in run {run}" if run is not None else ""
        raise NotFound(f"there is no result of '{sample}'{where}; see calib run show")
    runs = sorted({q.run_id for q in found})
    if len(runs) > 1:
        raise InputError(f"'{sample}' was measured in runs {', '.join(map(str, runs))}; name one with --run")
    return found


def _add_quantity(session: Session, tracing: Tracing, quantity: tables.QuantityRow) -> None:
    connection = session.connection()
    versions = _versions(session, quantity)
    for number in versions:
        key = tracing.add(traced_row(connection, "quantity", number))
        row = session.get_one(tables.QuantityRow, number)
        run = session.get_one(tables.Run, row.run_id)
        curve = session.get_one(tables.Curve, row.curve_id)
        curve_key = _add_curve(session, tracing, curve, key)
        source = add_run(session, tracing, session.get_one(tables.Run, curve.run_id), curve_key)
        if run.id == curve.run_id:
            tracing.add(tracing.things[source], key)
        else:
            add_run(session, tracing, run, key, stage=SAMPLE_RUN)
            _add_decisions(session, tracing, curve.run_id, {curve.id: curve_key}, "curve_id")
    by_number = {number: f"quantity {number}" for number in versions}
    _add_decisions(session, tracing, quantity.run_id, by_number, "last_quantity_id")


def _versions(session: Session, quantity: tables.QuantityRow) -> list[int]:
    """The quantity and those it superseded, latest first."""
    numbers, row = [quantity.id], quantity
    while row.supersedes is not None:
        row = session.get_one(tables.QuantityRow, row.supersedes)
        numbers.append(row.id)
    return numbers


def _add_curve(session: Session, tracing: Tracing, curve: tables.Curve, leads_to: str) -> str:
    standard = tables.CurveStandard
    by_fitted = select(standard.fitted, func.count()).where(standard.curve_id == curve.id)
    counts = {row[0]: row[1] for row in session.execute(by_fitted.group_by(standard.fitted))}
    levels = session.scalars(
        select(tables.Reading.concentration)
        .join(standard, standard.reading_id == tables.Reading.id)
        .where(standard.curve_id == curve.id, standard.fitted)
        .distinct()
        .order_by(tables.Reading.concentration)
    ).all()
    verdict = session.scalars(
        select(tables.VerdictRow).where(tables.VerdictRow.curve_id == curve.id)
    ).one_or_none()
    more = {
        "standards": f"{counts.get(True, 0)} readings fitted, {counts.get(False, 0)} not",
        "levels": in_words(list(levels)),
        "verdict": f"{verdict.decision} by the rules, {in_words(verdict.at)}" if verdict else "none",
    }
    return tracing.add(traced_row(session.connection(), "curve", curve.id, more=more), leads_to)


def add_run(session: Session, tracing: Tracing, run: tables.Run, leads_to: str, *, stage: int = 2) -> str:
    """Add a run with its facts in force, its file, method, instrument and material."""
    connection = session.connection()
    facts = facts_of(session, run.id)
    said = {
        "measured": in_words(facts.at),
        "operator": facts.operator,
        "logged": f"{in_words(run.logged_at)} by {run.logged_by}",
        "review": review_state(session, run.id).state,
    }
    if facts.supersedes is not None:
        said["amended"] = f"by {facts.by}: {facts.reason}"
    key = tracing.add(traced_row(connection, "run", run.id, stage=stage, more=said), leads_to)
    tracing.add(traced_row(connection, "original", run.original_id), key)
    tracing.add(traced_row(connection, "method", run.method_id), key)
    add_provenance(connection, tracing, facts.id, key)
    return key


def _add_decisions(
    session: Session, tracing: Tracing, run: int, versions: Mapping[int, str], named: str
) -> None:
    """Add the reviews of a run, each after the version it saw, and the reports issued on them."""
    connection = session.connection()
    for review in session.scalars(select(tables.Review).where(tables.Review.run_id == run)):
        seen = [n for n in versions if n <= (getattr(review, named) or 0)]
        if not seen:
            continue
        key = tracing.add(traced_row(connection, "review", review.id))
        tracing.add(tracing.things[versions[max(seen)]], key)
        issued = select(tables.IssuedReport.id).where(tables.IssuedReport.review_id == review.id)
        for number in session.scalars(issued.order_by(tables.IssuedReport.id)):
            report = traced_row(connection, "issued_report", number)
            tracing.add(report)
            tracing.add(tracing.things[key], report.key)
