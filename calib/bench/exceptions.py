"""What a reviewer has to look at first: everything about a run that is out of the ordinary."""

from __future__ import annotations

from collections import Counter
from collections.abc import Collection, Iterator
from dataclasses import dataclass

from sqlalchemy import select
from sqlalchemy.orm import Session, aliased

from calib import store as tables
from calib.bench.review_state import among
from calib.bench.settings import late_after, person_named, same_person
from calib.bench.show_run import local
from calib.store.entries import recorded_rows

CHECK_CRITERIA = ("check_recovery", "first_check_recovery")

Found = Iterator[tuple[int, "RunException"]]
Runs = Collection[int] | None


@dataclass(frozen=True, slots=True)
class RunException:
    """One thing out of the ordinary: its kind, and what, in words."""

    kind: str
    what: str


# In the order in which they are shown.
KINDS = (
    "rejected",
    "override",
    "expired lot",
    "exclusion",
    "failed check",
    "failed rule",
    "repeat of the day",
    "late entry",
    "clock set back",
    "correction",
    "finding",
    "person",
)


def exceptions_of_runs(session: Session, numbers: Runs = None) -> dict[int, tuple[RunException, ...]]:
    """Exceptions of runs, worst first; runs without one are left out.

    Parameters
    ----------
    session : Session
    numbers : collection of int, optional
        Only these runs; all by default.
    """
    found: dict[int, list[RunException]] = {}
    for step in (
        _verdicts,
        _overrides,
        _expired_lots,
        _exclusions,
        _repeats,
        _late_entries,
        _clock,
        _corrections,
        _findings,
        _unregistered,
    ):
        for number, exception in step(session, numbers):
            if numbers is None or number in numbers:
                found.setdefault(number, []).append(exception)
    return {number: tuple(sorted(each, key=lambda e: KINDS.index(e.kind))) for number, each in found.items()}


def _verdicts(session: Session, numbers: Runs) -> Found:
    query = (
        select(tables.Curve.run_id, tables.VerdictRow.decision, tables.VerdictRow.criteria)
        .join(tables.VerdictRow, tables.VerdictRow.curve_id == tables.Curve.id)
        .where(tables.is_current(tables.Curve), among(tables.Curve.run_id, numbers))
    )
    for number, decision, criteria in session.execute(query):
        if decision == "rejected":
            yield number, RunException("rejected", "the curve was rejected: no results")
        for criterion in criteria:
            if not criterion["passed"]:
                kind = "failed check" if criterion["id"] in CHECK_CRITERIA else "failed rule"
                yield number, RunException(kind, f"{criterion['what']}: {criterion['detail']}")


def _overrides(session: Session, numbers: Runs) -> Found:
    row = tables.RuleOverride
    for each in session.scalars(select(row).where(among(row.run_id, numbers)).order_by(row.id)):
        yield each.run_id, RunException("override", f"{each.what} by {each.by}: {each.reason}")


def _expired_lots(session: Session, numbers: Runs) -> Found:
    facts, lot = tables.RunFacts, tables.StandardLot
    query = (
        select(facts.run_id, facts.at, facts.offset_minutes, lot.name, lot.expiry)
        .join(lot, lot.id == facts.lot_id)
        .where(tables.is_current(facts), lot.expiry.is_not(None), among(facts.run_id, numbers))
    )
    for number, at, offset, name, expiry in session.execute(query):
        day = local(at, offset).date()
        if expiry is not None and day > expiry:
            yield number, RunException("expired lot", f"standard lot {name} used on {day}, expired {expiry}")


def _exclusions(session: Session, numbers: Runs) -> Found:
    row, reading = tables.Exclusion, tables.Reading
    query = (
        select(reading.run_id, reading.sample, reading.position, row)
        .join(row, row.reading_id == reading.id)
        .where(tables.is_current(row), row.decision == "exclude", among(reading.run_id, numbers))
        .order_by(row.id)
    )
    for number, sample, position, decision in session.execute(query):
        where = f"{sample} ({position})" if position else sample
        yield (
            number,
            RunException(
                "exclusion", f"{where} by {decision.by}, {decision.reason_class}: {decision.reason}"
            ),
        )
    automatic = (
        select(tables.Curve.run_id, tables.Reading.sample, tables.Reading.position, tables.CurveStandard)
        .join(tables.CurveStandard, tables.CurveStandard.curve_id == tables.Curve.id)
        .join(tables.Reading, tables.Reading.id == tables.CurveStandard.reading_id)
        .where(
            tables.is_current(tables.Curve),
            tables.CurveStandard.excluded,
            among(tables.Curve.run_id, numbers),
            ~select(row.id)
            .where(row.reading_id == tables.Reading.id, row.decision == "exclude", tables.is_current(row))
            .exists(),
        )
    )
    for number, sample, position, standard in session.execute(automatic):
        where = f"{sample} ({position})" if position else sample
        yield number, RunException("exclusion", f"{where} by the rules: {standard.reason}")


def _repeats(session: Session, _numbers: Runs) -> Found:
    facts = tables.RunFacts
    query = (
        select(tables.Run.id, facts.instrument_id, tables.Method.name, facts.at, facts.offset_minutes)
        .join(facts, facts.run_id == tables.Run.id)
        .join(tables.Method, tables.Method.id == tables.Run.method_id)
        .where(tables.Run.kind == "calibration", tables.is_current(facts))
    )
    days = {
        number: (instrument, method, local(at, offset).date())
        for number, instrument, method, at, offset in session.execute(query)
    }
    attempts = Counter(days.values())
    for number, day in days.items():
        if attempts[day] > 1:
            yield number, RunException("repeat of the day", f"one of {attempts[day]} calibrations that day")


def _late_entries(session: Session, numbers: Runs) -> Found:
    limit = late_after(session)
    query = (
        select(tables.Run.id, tables.Run.logged_at, tables.RunFacts.at)
        .join(tables.RunFacts, tables.RunFacts.run_id == tables.Run.id)
        .where(tables.is_current(tables.RunFacts), among(tables.Run.id, numbers))
    )
    for number, logged, measured in session.execute(query):
        if logged - measured > limit:
            hours = (logged - measured).total_seconds() / 3600
            late = f"{hours / 24:.0f} d" if hours >= 48 else f"{hours:.0f} h"
            yield number, RunException("late entry", f"logged {late} after it was measured")


def _clock(session: Session, _numbers: Runs) -> Found:
    behind = select(tables.ChainEntry.sequence).where(tables.ChainEntry.clock_behind)
    for sequence in session.scalars(behind).all():
        for number in sorted(recorded_rows(session.connection(), sequence).get("run", ())):
            yield (
                number,
                RunException("clock set back", f"the clock was behind the entry before (entry {sequence})"),
            )


def _corrections(session: Session, numbers: Runs) -> Found:
    facts, curve = tables.RunFacts, tables.Curve
    amended = select(facts).where(
        facts.supersedes.is_not(None), tables.is_current(facts), among(facts.run_id, numbers)
    )
    for row in session.scalars(amended):
        yield row.run_id, RunException("correction", f"amended by {row.by}: {row.reason}")
    refitted = select(curve.run_id, curve.by, curve.reason).where(
        curve.supersedes.is_not(None), tables.is_current(curve), among(curve.run_id, numbers)
    )
    for number, by, reason in session.execute(refitted):
        yield number, RunException("correction", f"fitted again by {by}: {reason}")


def _findings(session: Session, numbers: Runs) -> Found:
    query = select(tables.Curve.run_id, tables.Curve.findings).where(
        tables.is_current(tables.Curve), among(tables.Curve.run_id, numbers)
    )
    for number, findings in session.execute(query):
        for finding in findings:
            yield number, RunException("finding", finding["message"])


def _unregistered(session: Session, numbers: Runs) -> Found:
    """Who measured or logged without being registered as an analyst, where people are registered at all."""
    person = aliased(tables.Person)
    if session.scalar(select(person.id).limit(1)) is None:
        return
    query = (
        select(tables.Run.id, tables.Run.logged_by, tables.RunFacts.operator)
        .join(tables.RunFacts, tables.RunFacts.run_id == tables.Run.id)
        .where(tables.is_current(tables.RunFacts), among(tables.Run.id, numbers))
    )
    known: dict[str, bool] = {}
    for number, logged_by, operator in session.execute(query):
        for deed, name in (("logged", logged_by), ("measured", operator)):
            if name not in known:
                row = person_named(session, name)
                known[name] = row is not None and row.analyst
            if not known[name] and not (deed == "measured" and same_person(name, logged_by)):
                yield number, RunException("person", f"{deed} by {name}, who is not registered as analyst")
