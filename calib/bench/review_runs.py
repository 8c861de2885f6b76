"""The second person: what waits for review, exceptions first; approve or return."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime

from sqlalchemy import select
from sqlalchemy.orm import Session

from calib import store as tables
from calib.bench.exceptions import RunException, exceptions_of_runs
from calib.bench.find import run_numbered, void_of
from calib.bench.records import RunRecord
from calib.bench.review_state import APPROVED, RETURNED, ReviewState, review_states, standings
from calib.bench.settings import own_work_allowed, person_named, same_person
from calib.bench.show_run import RunLine, list_runs, show_run
from calib.errors import InputError


@dataclass(frozen=True, slots=True)
class ReviewLine:
    """One run for the reviewer, with what is out of the ordinary about it."""

    run: RunLine
    state: ReviewState
    exceptions: tuple[RunException, ...]


def runs_to_review(
    store: tables.Store,
    *,
    instrument: str | None = None,
    method: str | None = None,
    since: datetime | None = None,
    reviewed_too: bool = False,
) -> tuple[ReviewLine, ...]:
    """Runs that wait for review, those with most exceptions first, void ones left out.

    Parameters
    ----------
    instrument, method : str, optional
        Only these.
    since : datetime, optional
        Only runs measured from then on; a time without an offset is the instrument's own.
    reviewed_too : bool
        Approved and returned runs as well.
    """
    lines = [
        line
        for line in list_runs(store, instrument=instrument, method=method)
        if not line.void
        and (since is None or line.at >= (since if since.tzinfo else since.replace(tzinfo=line.at.tzinfo)))
    ]
    with store.reading() as session:
        states = review_states(session)
        waiting = [r for r in lines if reviewed_too or states[r.id].state not in (APPROVED, RETURNED)]
        exceptions = exceptions_of_runs(session) if waiting else {}
    found = [ReviewLine(r, states[r.id], exceptions.get(r.id, ())) for r in waiting]
    return tuple(sorted(found, key=lambda line: -len(line.exceptions)))


def exceptions_of(store: tables.Store, number: int) -> tuple[RunException, ...]:
    """What is out of the ordinary about one run, worst first."""
    with store.reading() as session:
        run_numbered(session, number)
        return exceptions_of_runs(session, (number,)).get(number, ())


def approve_run(store: tables.Store, number: int, *, by: str, comment: str | None = None) -> RunRecord:
    """Approve a run as it stands now: its results may be reported.

    Raises
    ------
    InputError
        When the person is no reviewer or had a hand in the run (and no setting allows it),
        when the run is void or approved already, or the curve it uses is not approved.
    """
    return _decide(store, number, APPROVED, by, comment)


def return_run(store: tables.Store, number: int, *, by: str, reason: str) -> RunRecord:
    """Return a run to its analyst, with the reason.

    Raises
    ------
    InputError
        When the person is no reviewer, the run is void or returned already, or no reason is given.
    """
    if not reason.strip():
        raise InputError("a run is returned for a reason; give it in words")
    return _decide(store, number, RETURNED, by, reason)


def _decide(store: tables.Store, number: int, decision: str, by: str, comment: str | None) -> RunRecord:
    action = "approve run" if decision == APPROVED else "return run"
    with store.change(action=action, by=by, reason=comment) as session:
        run = run_numbered(session, number)
        state = review_states(session, (number,))[number]
        _refuse_undecidable(session, run, state, decision)
        held = standings(session, (number,))[number]
        own_work = _had_a_hand(session, run, by)
        _refuse_person(session, number, by, own_work and decision == APPROVED)
        session.add(
            tables.Review(
                run_id=number,
                decision=decision,
                facts_id=held.facts_id,
                curve_id=held.curve_id,
                last_quantity_id=held.last_quantity_id,
                exceptions=[
                    {"kind": e.kind, "what": e.what}
                    for e in exceptions_of_runs(session, (number,)).get(number, ())
                ],
                own_work=own_work,
                comment=comment,
                supersedes=state.review_id,
                by=by,
                at=store.now(),
            )
        )
    return show_run(store, number)


def _refuse_undecidable(session: Session, run: tables.Run, state: ReviewState, decision: str) -> None:
    void = void_of(session, run.id)
    if void is not None:
        raise InputError(f"run {run.id} is void ({void.reason}); there is nothing to review")
    if state.state == decision:
        raise InputError(f"run {run.id} is {decision} already, by {state.by}; nothing to decide")
    if decision == APPROVED and run.curve_id is not None:
        source = session.get_one(tables.Curve, run.curve_id).run_id
        if not review_states(session, (source,))[source].approved:
            raise InputError(
                f"run {run.id} was read on the curve of run {source}, which is not approved; review that one first"
            )


def _refuse_person(session: Session, number: int, by: str, own_work: bool) -> None:
    person = person_named(session, by)
    if person is None or not person.reviewer:
        raise InputError(
            f"{by} is not registered as reviewer; a reviewer decides, or register one with "
            f"calib person set NAME --role reviewer"
        )
    if own_work and not own_work_allowed(session):
        raise InputError(
            f"{by} had a hand in run {number}: a second person has to review it (calib person setting "
            "own-work allowed lets one person do both, and says so on every such report)"
        )


def _had_a_hand(session: Session, run: tables.Run, name: str) -> bool:
    """Whether a person measured, logged or corrected a run."""
    hands = {run.logged_by}
    facts = session.scalars(select(tables.RunFacts).where(tables.RunFacts.run_id == run.id))
    hands.update(person for row in facts for person in (row.operator, row.by))
    hands.update(session.scalars(select(tables.Curve.by).where(tables.Curve.run_id == run.id)))
    return any(same_person(name, hand) for hand in hands)
