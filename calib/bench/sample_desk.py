"""The samples desk: what can be released now, what waits for dilution, another run or review, and why."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from datetime import date, datetime

from sqlalchemy import select
from sqlalchemy.orm import Session, aliased

from calib import store as tables
from calib.acceptance.dilutions import DilutedValue, DilutionOutcome, judge_dilutions
from calib.bench.find import method_named, require_registered
from calib.bench.flags import in_words
from calib.bench.keeping import definition_of, verdict_record
from calib.bench.keeping_quantities import WITHDRAWN, quantity_record
from calib.bench.method_definition import MethodDefinition
from calib.bench.records import QuantityRecord, VerdictRecord, lowest_reported
from calib.bench.review_state import ReviewState, review_states
from calib.bench.show_run import local
from calib.bench.statements import Statement, statement_of
from calib.errors import NotFound

RELEASE = "release"
REVIEW = "review"
DILUTE = "dilute"
RERUN = "re-run"
STATES = (RELEASE, REVIEW, DILUTE, RERUN)
IN_WORDS = {
    RELEASE: "can be released now",
    REVIEW: "waits for review",
    DILUTE: "waits for dilution",
    RERUN: "waits for another run",
}
DILUTE_FLAGS = ("saturated", "above-range")
RERUN_FLAGS = (
    "not-bracketed",
    "too-few-replicates",
    "replicate-cv",
    "replicate-spread",
    "carry-over-risk",
    "internal-standard",
    "curve-rejected",
    "curve-superseded",
    "no-value",
    "off-curve",
)


@dataclass(frozen=True, slots=True)
class SampleResult:
    """One sample at one dilution in one run."""

    run: int
    kind: str
    instrument: str
    at: datetime
    quantity: QuantityRecord
    verdict: VerdictRecord
    lowest_reported: float | None
    review: ReviewState
    void: bool
    statement: Statement | None

    @property
    def approved(self) -> bool:
        """Whether a second person approved the run as it stands."""
        return self.review.approved

    @property
    def stands(self) -> bool:
        """Whether there is a value, or a limit, that may be reported once approved."""
        q = self.quantity
        has_any = q.concentration is not None or q.position == "below"
        return has_any and not any(flag in RERUN_FLAGS or flag in DILUTE_FLAGS for flag in q.flags)


@dataclass(frozen=True, slots=True)
class SampleRecord:
    """One sample under one method, over all its dilutions and runs.

    Attributes
    ----------
    state : str
        One of `STATES`.
    why : str
        The reason, in words.
    results : tuple of SampleResult
        Latest first; void ones too.
    counts : tuple of SampleResult
        Those whose value counts.
    dilutions : DilutionOutcome
        What several dilutions came to.
    """

    sample: str
    method: str
    unit: str
    state: str
    why: str
    results: tuple[SampleResult, ...]
    counts: tuple[SampleResult, ...]
    dilutions: DilutionOutcome

    @property
    def latest(self) -> datetime:
        """When it was last measured."""
        return self.results[0].at


def list_samples(
    store: tables.Store,
    *,
    instrument: str | None = None,
    method: str | None = None,
    since: date | None = None,
    state: str | None = None,
) -> tuple[SampleRecord, ...]:
    """Samples with what each waits for, those that wait longest on a person first.

    Parameters
    ----------
    instrument, method : str, optional
        Only these.
    since : date, optional
        Only samples last measured on this day or later; the last day with samples where left out.
    state : str, optional
        Only samples in this state.

    Raises
    ------
    NotFound
        When there is no such instrument or method.
    """
    with store.reading() as session:
        require_registered(session, instrument, method)
        found = _samples(session, instrument, method, None)
    day = since or max((s.latest.date() for s in found), default=None)
    chosen = [s for s in found if day is not None and s.latest.date() >= day and state in (None, s.state)]
    return tuple(sorted(chosen, key=lambda s: (-STATES.index(s.state), s.method, s.sample)))


def show_sample(store: tables.Store, name: str, method: str | None = None) -> tuple[SampleRecord, ...]:
    """One sample, under each method it was measured by.

    Raises
    ------
    NotFound
        When no run holds it.
    """
    with store.reading() as session:
        if method is not None:
            method_named(session, method)
        found = _samples(session, None, method, name)
    if not found:
        raise NotFound(f"no run holds a sample '{name}'; look at calib sample list")
    return tuple(found)


def _samples(
    session: Session, instrument: str | None, method: str | None, name: str | None
) -> list[SampleRecord]:
    grouped: dict[tuple[str, str], list[SampleResult]] = {}
    definitions: dict[str, MethodDefinition] = {}
    for row in _rows(session, instrument, method, name):
        definition, result = row
        grouped.setdefault((definition.name, result.quantity.sample), []).append(result)
        definitions[definition.name] = definition
    return [_record(definitions[m], sample, results) for (m, sample), results in grouped.items()]


def _rows(
    session: Session, instrument: str | None, method: str | None, name: str | None
) -> Iterable[tuple[MethodDefinition, SampleResult]]:
    curve = aliased(tables.Curve)
    query = (
        select(
            tables.QuantityRow,
            tables.Run,
            tables.RunFacts,
            tables.Instrument.name,
            tables.VerdictRow,
            tables.RunVoid.id,
        )
        .join(tables.Run, tables.Run.id == tables.QuantityRow.run_id)
        .join(tables.RunFacts, tables.RunFacts.run_id == tables.Run.id)
        .join(tables.Instrument, tables.Instrument.id == tables.RunFacts.instrument_id)
        .join(tables.Method, tables.Method.id == tables.Run.method_id)
        .join(curve, curve.id == tables.QuantityRow.curve_id)
        .join(tables.VerdictRow, tables.VerdictRow.curve_id == curve.id)
        .outerjoin(tables.RunVoid, tables.RunVoid.run_id == tables.Run.id)
        .where(
            tables.QuantityRow.role == "unknown",
            tables.is_current(tables.QuantityRow),
            tables.is_current(tables.RunFacts),
        )
        .order_by(tables.RunFacts.at.desc(), tables.Run.id.desc(), tables.QuantityRow.id)
    )
    if instrument is not None:
        query = query.where(tables.Instrument.name == instrument)
    if method is not None:
        query = query.where(tables.Method.name == method)
    if name is not None:
        query = query.where(tables.QuantityRow.sample == name)
    definitions: dict[int, MethodDefinition] = {}
    verdicts: dict[int, VerdictRecord] = {}
    reviews = review_states(session)
    for quantity, run, facts, where, verdict_row, voided in session.execute(query):
        if WITHDRAWN in quantity.flags:
            continue
        if run.method_id not in definitions:
            definitions[run.method_id] = definition_of(session.get_one(tables.Method, run.method_id))
        if verdict_row.id not in verdicts:
            verdicts[verdict_row.id] = verdict_record(verdict_row)
        definition, verdict = definitions[run.method_id], verdicts[verdict_row.id]
        q = quantity_record(quantity)
        yield (
            definition,
            SampleResult(
                run=run.id,
                kind=run.kind,
                instrument=where,
                at=local(facts.at, facts.offset_minutes),
                quantity=q,
                verdict=verdict,
                lowest_reported=lowest_reported(definition, verdict),
                review=reviews[run.id],
                void=voided is not None,
                statement=statement_of(definition, verdict, q),
            ),
        )


def _record(definition: MethodDefinition, sample: str, results: Sequence[SampleResult]) -> SampleRecord:
    latest: dict[float, SampleResult] = {}
    for result in results:
        if not result.void:
            latest.setdefault(result.quantity.dilution, result)
    standing = [r for r in latest.values() if r.stands]
    rules = definition.results
    outcome = judge_dilutions([_diluted(r) for r in standing], rules.dilution_agreement, rules.which_dilution)
    counts = tuple(r for r in standing if r.quantity.dilution in outcome.counts and _inside(r))
    if not counts and outcome.agree is not False:
        counts = tuple(_least_diluted_below(standing))
    state, why = _state(list(latest.values()), counts, outcome, rules.dilution_agreement)
    others = sorted(
        {r.run for r in results if not r.void and r.stands and _inside(r)} - {r.run for r in latest.values()}
    )
    if counts and others:
        why += f"; run {', '.join(map(str, others))} holds a value too"
    return SampleRecord(
        sample, definition.name, definition.concentration_unit, state, why, tuple(results), counts, outcome
    )


def _inside(result: SampleResult) -> bool:
    return result.quantity.concentration is not None


def _diluted(result: SampleResult) -> DilutedValue:
    q = result.quantity
    return DilutedValue(q.dilution, math.nan if q.concentration is None else q.concentration, _inside(result))


def _least_diluted_below(standing: Sequence[SampleResult]) -> list[SampleResult]:
    """The one limit that is reported where every value lies below the range."""
    below = [r for r in standing if not _inside(r)]
    return sorted(below, key=lambda r: r.quantity.dilution)[:1]


def _state(
    latest: Sequence[SampleResult],
    counts: Sequence[SampleResult],
    outcome: DilutionOutcome,
    limit: float | None,
) -> tuple[str, str]:
    if not latest:
        return RERUN, "every run that holds it is void"
    if outcome.agree is False and not counts:
        hook = "; the value rises with the dilution, as with a hook" if outcome.hook else ""
        return (
            RERUN,
            f"its dilutions differ by {100 * outcome.spread:.1f} %, limit {100 * (limit or 0):g} %{hook}",
        )
    if counts:
        return _waiting(counts, outcome)
    for flags, state in ((DILUTE_FLAGS, DILUTE), (RERUN_FLAGS, RERUN)):
        for result in latest:
            told = [in_words(flag) for flag in result.quantity.flags if flag in flags]
            if told:
                return (
                    state,
                    f"run {result.run}: {'; '.join(told)}{_advice(result) if state == DILUTE else ''}",
                )
    return RERUN, f"run {latest[0].run}: no result"


def _waiting(counts: Sequence[SampleResult], outcome: DilutionOutcome) -> tuple[str, str]:
    unseen = dict.fromkeys(f"run {r.run}: {r.review.state}" for r in counts if not r.approved)
    hook = "; lower dilutions left out, as with a hook" if outcome.hook and outcome.agree is False else ""
    if unseen:
        return REVIEW, f"{'; '.join(unseen)}{hook}"
    return RELEASE, f"run {', '.join(str(r.run) for r in counts)} is approved{hook}"


def _advice(result: SampleResult) -> str:
    """Dilution that brings the kept estimate to the middle of the range; the estimate itself is not told."""
    q, verdict = result.quantity, result.verdict
    if q.estimate is None or verdict.highest is None or verdict.lowest is None:
        return ""
    factor = q.estimate / math.sqrt(verdict.lowest * verdict.highest)
    size = 10 ** math.floor(math.log10(factor))
    return f" (about × {math.ceil(factor / size) * size:g})"
