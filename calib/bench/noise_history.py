"""The past runs a method's noise model is pooled over: accepted, of the same method and instrument."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from datetime import datetime
from typing import Any

import numpy as np
from sqlalchemy import Select, select
from sqlalchemy.orm import Session

from calib import store as tables
from calib.bench.keeping import curve_of, definition_of
from calib.bench.method_definition import HISTORY, MethodDefinition
from calib.bench.records import NoiseHistory, PastRun
from calib.curves.curve import Curve
from calib.curves.history_noise import ENOUGH_RUNS, HistoryNoise
from calib.curves.noise import noise_from_dict
from calib.curves.pooling import MOST_RUNS, pool_noise
from calib.curves.standards import Standards, frozen
from calib.errors import InputError
from calib.intake import conversion_factor

Pair = tuple[float, float]  # nominal concentration and response


def history_before(
    session: Session, instrument: str, definition: MethodDefinition, at: datetime
) -> NoiseHistory | None:
    """Noise pooled over the last 50 accepted runs measured before a moment.

    Parameters
    ----------
    instrument : str
    definition : MethodDefinition
        Runs of any version of this method count that has the same response model and units.
    at : datetime

    Returns
    -------
    NoiseHistory or None
        None where the method does not ask for it, or there are fewer than 5 runs that can be pooled.
    """
    if definition.noise != HISTORY:
        return None
    found = past_runs(session, instrument, definition, at)
    if len(found) < ENOUGH_RUNS:
        return None
    try:
        noise = pool_noise(_curves(session, definition.name, found))
    except InputError:
        # Past runs without scatter tell nothing; the curve says that it rests on one run.
        return None
    return NoiseHistory(noise, found) if noise.runs >= ENOUGH_RUNS else None


def history_of(row: tables.Curve) -> NoiseHistory | None:
    """What the noise model of a curve was pooled over, where it was."""
    noise = noise_from_dict(row.noise)
    if not isinstance(noise, HistoryNoise):
        return None
    return NoiseHistory(noise, tuple(PastRun(**past) for past in row.noise_from or ()))


def past_runs(
    session: Session, instrument: str, definition: MethodDefinition, at: datetime
) -> tuple[PastRun, ...]:
    """The runs a history consists of, oldest first."""
    alike = {
        number
        for number, other in _definitions(session, definition.name).items()
        if _same_quantities(other, definition)
    }
    query = _accepted(instrument, alike, at).order_by(tables.RunFacts.at.desc(), tables.Run.id.desc())
    rows = session.execute(query.limit(MOST_RUNS)).all()
    return tuple(PastRun(*numbers) for numbers in reversed(rows))


def refuse_changed_history(
    session: Session, instrument: str, definition: MethodDefinition, at: datetime, used: NoiseHistory | None
) -> None:
    """Check again, inside the transaction, that the runs a noise model was pooled over are the same.

    Raises
    ------
    InputError
        When a run was logged, corrected or declared void meanwhile.
    """
    if used is not None and past_runs(session, instrument, definition, at) != used.past:
        raise InputError(
            f"the past runs of {instrument} and method {definition.name} changed meanwhile, and the noise model "
            "was pooled over them; run the command again"
        )


def _same_quantities(one: MethodDefinition, other: MethodDefinition) -> bool:
    return (one.model, one.response_unit, one.concentration_unit) == (
        other.model,
        other.response_unit,
        other.concentration_unit,
    )


def _accepted(instrument: str, methods: set[int], at: datetime) -> Select[*tuple[Any, ...]]:
    """Run and curve numbers of accepted runs with residual degrees of freedom, measured before."""
    return (
        select(tables.Run.id, tables.Curve.id)
        .join(tables.RunFacts, tables.RunFacts.run_id == tables.Run.id)
        .join(tables.Instrument, tables.Instrument.id == tables.RunFacts.instrument_id)
        .join(tables.Curve, tables.Curve.run_id == tables.Run.id)
        .join(tables.VerdictRow, tables.VerdictRow.curve_id == tables.Curve.id)
        .outerjoin(tables.RunVoid, tables.RunVoid.run_id == tables.Run.id)
        .where(
            tables.Run.kind == "calibration",
            tables.Run.method_id.in_(methods),
            tables.Instrument.name == instrument,
            tables.RunFacts.at < at,
            tables.VerdictRow.decision != "rejected",
            tables.Curve.converged,
            tables.Curve.degrees_of_freedom > 0,
            tables.RunVoid.id.is_(None),
            tables.is_current(tables.RunFacts),
            tables.is_current(tables.Curve),
        )
    )


def _curves(session: Session, name: str, past: Sequence[PastRun]) -> list[Curve]:
    """Curves with the standards they were fitted to; a few queries, however many runs."""
    numbers = [p.curve for p in past]
    rows = {c.id: c for c in session.scalars(select(tables.Curve).where(tables.Curve.id.in_(numbers)))}
    definitions = _definitions(session, name)
    runs = {
        run: (definitions[method], conversion_factor(unit, definitions[method].concentration_unit))
        for run, method, unit in session.execute(
            select(tables.Run.id, tables.Run.method_id, tables.Run.concentration_unit).where(
                tables.Run.id.in_(p.run for p in past)
            )
        )
    }
    fitted = _fitted_standards(session, numbers)
    blanks = _fitted_blanks(session, [run for run, (definition, _) in runs.items() if definition.fit_blank])
    return [
        replace(
            curve_of(rows[p.curve], ()),
            standards=_standards([*fitted[p.curve], *blanks.get(p.run, ())], runs[p.run][1]),
        )
        for p in past
    ]


def _definitions(session: Session, name: str) -> dict[int, MethodDefinition]:
    """Every version of a method by the number of its row."""
    rows = session.scalars(select(tables.Method).where(tables.Method.name == name))
    return {row.id: definition_of(row) for row in rows}


def _fitted_standards(session: Session, curves: Sequence[int]) -> dict[int, list[Pair]]:
    """Nominal concentration and response of the standards each curve was fitted to."""
    found: dict[int, list[Pair]] = {curve: [] for curve in curves}
    query = (
        select(tables.CurveStandard.curve_id, tables.Reading.concentration, tables.Reading.response)
        .join(tables.Reading, tables.Reading.id == tables.CurveStandard.reading_id)
        .where(tables.CurveStandard.curve_id.in_(curves), tables.CurveStandard.fitted)
        .order_by(tables.CurveStandard.id)
    )
    for curve, concentration, response in session.execute(query):
        if response is not None:
            found[curve].append((concentration or 0.0, response))
    return found


def _fitted_blanks(session: Session, runs: Sequence[int]) -> dict[int, list[Pair]]:
    """Blanks and zeros of runs that fit them, those a person excluded left out."""
    excluded = session.execute(
        select(tables.Reading.run_id, tables.Reading.ordinal)
        .join(tables.Exclusion, tables.Exclusion.reading_id == tables.Reading.id)
        .where(
            tables.Reading.run_id.in_(runs),
            tables.Exclusion.decision == "exclude",
            tables.is_current(tables.Exclusion),
        )
    )
    left_out = {(run, ordinal) for run, ordinal in excluded}
    row = tables.Reading
    query = (
        select(row.run_id, row.ordinal, row.concentration, row.response)
        .where(row.run_id.in_(runs), row.role.in_(("blank", "zero")), tables.is_current(row))
        .order_by(row.run_id, row.ordinal)
    )
    found: dict[int, list[Pair]] = {run: [] for run in runs}
    for run, ordinal, concentration, response in session.execute(query):
        if response is not None and (run, ordinal) not in left_out:
            found[run].append((concentration or 0.0, response))
    return found


def _standards(pairs: Sequence[Pair], factor: float) -> Standards:
    values = np.array(pairs, dtype=np.float64)
    return Standards(frozen(values[:, 0] * factor), frozen(values[:, 1]))
