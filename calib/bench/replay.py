"""Evaluate past runs under another method version: what would have changed. Nothing is written."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

from sqlalchemy import select
from sqlalchemy.orm import Session

from calib import store as tables
from calib.bench.evaluate import with_basis
from calib.bench.evaluate_many import evaluate_many
from calib.bench.evidence import finite
from calib.bench.find import instrument_named, method_named, run_numbered
from calib.bench.find_basis import kept_bases, under_settings
from calib.bench.formed_results import curve_run
from calib.bench.keeping import definition_of
from calib.bench.method_definition import HISTORY, MethodDefinition, read_definition
from calib.bench.noise_history import history_before
from calib.bench.quantify import QUANTIFIED_ROLES
from calib.bench.quantities import quantities_of
from calib.bench.read_archive import (
    REPORTED_ROLES,
    ArchivedRun,
    Reported,
    SampleKey,
    archived_runs,
    curves_in_force,
    measured_of_runs,
    reported_in_force,
)
from calib.bench.records import Evaluation, Measured, NoiseHistory, QuantityRecord, VerdictRecord
from calib.bench.register import read_method_text
from calib.bench.replay_records import (
    Outcome,
    Replay,
    ReplayedMethod,
    ReplayedRun,
    Span,
    sample_changes,
)
from calib.bench.uncertainty_basis import CURVE_ONLY, UncertaintyBasis
from calib.curves.curve import Curve
from calib.curves.history_noise import HistoryNoise
from calib.errors import InputError, MethodError, NotFound, UnknownUnit
from calib.quantification.range import working_range

# Curves fitted and held at once: enough for a stack to pay, few enough for flat memory.
BATCH = 256
NOTHING = Span(None, None)

Progress = Callable[[int, int], None]


@dataclass(frozen=True, slots=True)
class ReplayRequest:
    """Which runs, and under what; all runs under the latest version of their method where left open.

    Attributes
    ----------
    method, instrument : str, optional
        Only runs of these.
    runs : tuple of int
        Only these.
    version : int, optional
        Version of ``method``.
    file : Path, optional
        TOML file of a method that is in no store yet, instead of a version.
    """

    method: str | None = None
    instrument: str | None = None
    runs: tuple[int, ...] = ()
    version: int | None = None
    file: Path | None = None


@dataclass(frozen=True, slots=True)
class _Target:
    """The definition the runs of one method are evaluated under."""

    definition: MethodDefinition
    version: int | None
    file: str | None


@dataclass(frozen=True, slots=True)
class _Archive:
    """Every run of the store, and every method version by the number of its row."""

    runs: Mapping[int, ArchivedRun]
    definitions: Mapping[int, tuple[int, MethodDefinition]]

    def definition_of_run(self, number: int) -> MethodDefinition:
        """What a run was judged by."""
        return self.definitions[self.runs[number].method_id][1]


def _silent(done: int, total: int) -> None:
    """No one is watching."""


def replay_runs(store: tables.Store, request: ReplayRequest, progress: Progress = _silent) -> Replay:
    """Evaluate runs again under another method version and compare; the store is only read.

    Readings, exclusions, dilutions and times are those in force. Runs of unknowns follow the
    curve they were read on. Void runs are left out.

    Parameters
    ----------
    progress : callable
        Called with the number of runs done and in all.

    Raises
    ------
    NotFound
        For an unknown run, method, version or instrument, and when there is nothing to replay.
    InputError
        When the request contradicts itself or the versions have different units.
    """
    with store.reading() as session:
        archive = _Archive(archived_runs(session), _definitions(session))
        named = _resolved(session, request)
        chosen = [run for run in archive.runs.values() if _fits(run, named)]
        live = [run for run in chosen if not run.void]
        if not live:
            raise NotFound(_nothing(chosen))
        targets = {name: _target(session, name, named) for name in sorted({run.method for run in live})}
        for run in live:
            _refuse_other_units(run, archive, targets[run.method])
        replayed: list[ReplayedRun] = []
        for batch in _batches(live):
            replayed += _replay_batch(session, archive, targets[batch[0].method], batch)
            session.expunge_all()  # what is compared is not held any longer
            progress(len(replayed), len(live))
    return Replay(
        methods=tuple(
            ReplayedMethod(name, t.version, t.file, sum(run.method == name for run in live))
            for name, t in targets.items()
        ),
        changed=tuple(sorted((r for r in replayed if r.changes), key=lambda r: (r.at, r.id))),
        runs=len(live),
        void=len(chosen) - len(live),
        samples=sum(r.sample_count for r in replayed),
    )


def _definitions(session: Session) -> dict[int, tuple[int, MethodDefinition]]:
    rows = session.scalars(select(tables.Method))
    return {row.id: (row.version, definition_of(row)) for row in rows}


@dataclass(frozen=True, slots=True)
class _Named:
    """A request whose names are known to be there, with the definition of its file."""

    request: ReplayRequest
    method: str | None
    candidate: _Target | None


def _resolved(session: Session, request: ReplayRequest) -> _Named:
    """Refuse what is not there or contradicts itself."""
    if request.instrument is not None:
        instrument_named(session, request.instrument)
    for number in request.runs:
        run_numbered(session, number)
    if request.version is not None and request.file is not None:
        raise InputError("a version and a file are two things to replay under; give one of them")
    if request.version is not None and request.method is None:
        raise InputError(f"version {request.version} of which method? name the method")
    if request.method is not None:
        method_named(session, request.method, request.version)
    if request.file is None:
        return _Named(request, request.method, None)
    text = read_method_text(request.file)
    name = _definition_in(request.file, text, 1).name
    if request.method not in (None, name):
        raise InputError(
            f"{request.file}: defines method {name}, not {request.method}; correct one of the two"
        )
    definition = _definition_in(request.file, text, method_named(session, name).version + 1)
    return _Named(request, name, _Target(definition, None, request.file.name))


def _definition_in(file: Path, text: str, version: int) -> MethodDefinition:
    try:
        return read_definition(text, version)
    except (MethodError, UnknownUnit) as cause:
        raise type(cause)(f"{file}: {cause}") from cause


def _fits(run: ArchivedRun, named: _Named) -> bool:
    request = named.request
    return (
        named.method in (None, run.method)
        and request.instrument in (None, run.instrument)
        and (not request.runs or run.id in request.runs)
    )


def _nothing(chosen: Sequence[ArchivedRun]) -> str:
    if not chosen:
        return "nothing to replay: no run fits; look at calib run list and ask for less"
    are = "1 run that fits is" if len(chosen) == 1 else f"{len(chosen)} runs that fit are"
    return f"nothing to replay: the {are} void; look at calib run list"


def _target(session: Session, name: str, named: _Named) -> _Target:
    if named.candidate is not None:
        return named.candidate
    row = method_named(session, name, named.request.version)
    return _Target(definition_of(row), row.version, None)


def _refuse_other_units(run: ArchivedRun, archive: _Archive, target: _Target) -> None:
    version, old = archive.definitions[run.method_id]
    new = target.definition
    here = f"version {target.version}" if target.file is None else target.file
    for what, before, after in (
        ("concentrations", old.concentration_unit, new.concentration_unit),
        ("responses", old.response_unit, new.response_unit),
    ):
        if before != after:
            raise InputError(
                f"run {run.id} was judged by version {version} of method {run.method} with {what} in {before}, but "
                f"{here} has them in {after}; replay it under a version with the same units"
            )


def _batches(runs: Iterable[ArchivedRun]) -> Iterator[list[ArchivedRun]]:
    """Runs of one method, those read on one curve together."""
    families: dict[tuple[str, int], list[ArchivedRun]] = {}
    for run in runs:
        families.setdefault((run.method, run.source), []).append(run)
    batch: list[ArchivedRun] = []
    for (method, _), family in sorted(families.items(), key=lambda item: item[0][0]):
        if batch and (len(batch) >= BATCH or batch[0].method != method):
            yield batch
            batch = []
        batch += family
    yield batch


def _replay_batch(
    session: Session, archive: _Archive, target: _Target, batch: Sequence[ArchivedRun]
) -> list[ReplayedRun]:
    """Read, evaluate and compare runs of one method."""
    sources = {run.source for run in batch}
    needed = [archive.runs[n] for n in sorted(sources | {run.id for run in batch})]
    measured = measured_of_runs(session, needed, target.definition.concentration_unit)
    before = curves_in_force(session, {n: measured[n] for n in sources}, archive.definition_of_run)
    reported = reported_in_force(session, [run.id for run in batch])
    histories = {
        n: history
        for n in sources
        if (history := _history(session, archive, target.definition, archive.runs[n], before[n][0]))
    }
    bases = kept_bases(session, [run.id for run in batch])
    after = evaluate_many(target.definition, {n: measured[n] for n in sources}, histories)
    replayed = []
    for run in batch:
        version, old = archive.definitions[run.method_id]
        curve, verdict = before[run.source]
        source = archive.runs[run.source]
        levels = [m.concentration for m in measured[run.source] if m.concentration is not None]
        basis = under_settings(bases.get(run.id, CURVE_ONLY), target.definition, levels)
        outcome, quantities = _outcome(
            run, source, old, target.definition, after[run.source], measured, basis
        )
        fresh = _reported(quantities)
        replayed.append(
            ReplayedRun(
                id=run.id,
                kind=run.kind,
                instrument=run.instrument,
                method=run.method,
                version=version,
                at=run.at,
                unit=target.definition.concentration_unit,
                before=_of_curve(curve, verdict, old),
                after=outcome,
                samples=tuple(sample_changes(reported[run.id], fresh)),
                sample_count=_samples(measured[run.id]),
            )
        )
    return replayed


def _history(
    session: Session, archive: _Archive, new: MethodDefinition, run: ArchivedRun, curve: Curve
) -> NoiseHistory | None:
    """Noise model a run would have been given: the one it has, or one pooled for the first time."""
    if isinstance(curve.noise, HistoryNoise):
        return NoiseHistory(curve.noise, ())
    if archive.definition_of_run(run.id).noise == HISTORY:  # it had too little history, and still has
        return None
    return history_before(session, run.instrument, new, run.at)


def _outcome(
    run: ArchivedRun,
    source: ArchivedRun,
    old: MethodDefinition,
    new: MethodDefinition,
    evaluation: Evaluation | None,
    measured: Mapping[int, Sequence[Measured]],
    basis: UncertaintyBasis,
) -> tuple[Outcome, Sequence[QuantityRecord]]:
    """Verdict and quantities of a run under the new definition."""
    if evaluation is None:
        return Outcome("rejected", ("no standard with a response is left to fit",), NOTHING, NOTHING), ()
    outcome = _of_curve(evaluation.curve, evaluation.verdict, new)
    if source.id == run.id:
        return outcome, with_basis(new, measured[run.id], evaluation, basis).quantities
    hours = (run.at - source.at).total_seconds() / 3600.0
    # A time that was amended may lie beyond the old limit too; that is no change.
    if new.valid_hours < hours <= old.valid_hours:
        reason = (
            f"the curve of run {source.id} would have been valid for {new.valid_hours:g} h, and these samples "
            f"were measured {hours:.1f} h after it"
        )
        return Outcome("expired", (reason,), outcome.calibrated, outcome.working), ()
    verdict = evaluation.verdict
    others = [m for m in measured[run.id] if m.role in QUANTIFIED_ROLES]
    return outcome, quantities_of(
        new,
        evaluation.curve,
        verdict.accepted,
        others,
        verdict.lowest,
        verdict.highest,
        of_curve=curve_run(measured[source.id]),
        basis=basis,
    )


def _of_curve(curve: Curve, verdict: VerdictRecord, definition: MethodDefinition) -> Outcome:
    working = working_range(curve, definition.required_cv)
    return Outcome(
        verdict.decision,
        verdict.reasons,
        Span(verdict.lowest, verdict.highest),
        Span(finite(working.lowest), finite(working.highest)),
    )


def _reported(quantities: Iterable[QuantityRecord]) -> dict[SampleKey, Reported]:
    """Reported concentrations of unknowns and controls."""
    return {
        (q.role, q.sample, q.dilution, q.nominal or 0.0): Reported(q.concentration, q.lower, q.upper)
        for q in quantities
        if q.role in REPORTED_ROLES and q.concentration is not None
    }


def _samples(measured: Iterable[Measured]) -> int:
    """How many unknowns and controls there are, each dilution by itself."""
    return len(
        {(m.role, m.sample, m.dilution, m.concentration or 0.0) for m in measured if m.role in REPORTED_ROLES}
    )
