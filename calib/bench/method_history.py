"""The accepted runs of a method on one instrument: what it measures, and with what curves."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

from sqlalchemy import select
from sqlalchemy.orm import Session

from calib import store as tables
from calib.bench.find import instrument_named, method_named
from calib.bench.keeping import definition_of
from calib.bench.method_definition import MethodDefinition
from calib.bench.read_archive import ArchivedRun, archived_runs, curves_in_force, measured_of_runs
from calib.bench.records import Measured, VerdictRecord
from calib.curves.curve import Curve
from calib.curves.pooling import MOST_RUNS
from calib.errors import InputError, NotFound

CHUNK = 64


@dataclass(frozen=True, slots=True)
class AcceptedRun:
    """An accepted run with its curve in force and its readings in the unit of the method."""

    run: ArchivedRun
    curve: Curve
    verdict: VerdictRecord
    readings: tuple[Measured, ...]


@dataclass(frozen=True, slots=True)
class MethodHistory:
    """A method version and its last accepted runs on one instrument, oldest first; at least one."""

    definition: MethodDefinition
    version: int
    instrument: str
    accepted: tuple[AcceptedRun, ...]

    @property
    def latest(self) -> AcceptedRun:
        """The last accepted run."""
        return self.accepted[-1]


def history_of_method(
    store: tables.Store, method: str, instrument: str | None = None, most: int = MOST_RUNS
) -> MethodHistory:
    """Read the last accepted runs of a method; the store is only read.

    Runs under any version of the method count that has the response model and the units of the latest one.

    Parameters
    ----------
    instrument : str, optional
        Needed where several instruments have runs of the method.
    most : int
        No more runs than this, the latest ones.

    Raises
    ------
    NotFound
        For an unknown method or instrument, and when there is no accepted run.
    InputError
        When the instrument has to be named.
    """
    with store.reading() as session:
        row = method_named(session, method)
        if instrument is not None:
            instrument_named(session, instrument)
        definitions = {
            m.id: definition_of(m)
            for m in session.scalars(select(tables.Method).where(tables.Method.name == method))
        }
        latest = definitions[row.id]
        runs = [
            run
            for run in archived_runs(session).values()
            if run.kind == "calibration"
            and not run.void
            and run.method == method
            and instrument in (None, run.instrument)
            and _alike(definitions[run.method_id], latest)
        ]
        where = _one_instrument(method, runs) if instrument is None else instrument
        accepted = list(_accepted(session, runs, definitions, latest, most))
    if not accepted:
        raise NotFound(
            f"method {method} has no accepted run{'' if where is None else f' on {where}'} with model "
            f"{latest.model}; log standards first"
        )
    return MethodHistory(latest, row.version, accepted[0].run.instrument, tuple(reversed(accepted)))


def _alike(one: MethodDefinition, other: MethodDefinition) -> bool:
    return (one.model, one.concentration_unit, one.response_unit) == (
        other.model,
        other.concentration_unit,
        other.response_unit,
    )


def _one_instrument(method: str, runs: Sequence[ArchivedRun]) -> str | None:
    names = sorted({run.instrument for run in runs})
    if len(names) > 1:
        raise InputError(f"method {method} has runs on {', '.join(names)}; name one with --instrument")
    return names[0] if names else None


def _accepted(
    session: Session,
    runs: Sequence[ArchivedRun],
    definitions: dict[int, MethodDefinition],
    latest: MethodDefinition,
    most: int,
) -> Iterator[AcceptedRun]:
    """Accepted runs, the latest first, a chunk of queries at a time."""
    found = 0
    for end in range(len(runs), 0, -CHUNK):
        chunk = runs[max(end - CHUNK, 0) : end]
        measured = measured_of_runs(session, chunk, latest.concentration_unit)
        methods = {run.id: definitions[run.method_id] for run in chunk}
        curves = curves_in_force(session, measured, methods.__getitem__)
        for run in reversed(chunk):
            if run.id not in curves or not curves[run.id][1].accepted:
                continue
            yield AcceptedRun(run, *curves[run.id], measured[run.id])
            found += 1
            if found == most:
                return
