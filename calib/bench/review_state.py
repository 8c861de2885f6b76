"""Whether a run is approved as it stands now, asked for one run or for all at once."""

from __future__ import annotations

from collections.abc import Collection, Mapping
from dataclasses import dataclass
from datetime import datetime

from sqlalchemy import ColumnElement, func, select, true
from sqlalchemy.orm import InstrumentedAttribute, Session, aliased

from calib import store as tables

NOT_REVIEWED = "not reviewed"
APPROVED = "approved"
RETURNED = "returned"
CHANGED = "changed since its review"
CURVE_OPEN = "its curve is not approved"


@dataclass(frozen=True, slots=True)
class ReviewState:
    """What a second person said about a run, and whether that still holds.

    Attributes
    ----------
    state : str
        'not reviewed', 'approved', 'returned', 'changed since its review', or 'its curve
        is not approved' for unknowns that were read on the curve of such a run.
    review_id, by, at, comment
        Of the latest review, if there is one.
    own_work : bool
        The reviewer had a hand in the run; a setting allowed it.
    """

    state: str = NOT_REVIEWED
    review_id: int | None = None
    by: str | None = None
    at: datetime | None = None
    comment: str | None = None
    own_work: bool = False

    @property
    def approved(self) -> bool:
        """Whether results of the run may be reported."""
        return self.state == APPROVED


NO_REVIEW = ReviewState()


@dataclass(frozen=True, slots=True)
class Standing:
    """The rows of a run that are in force; a review names them, and lapses when they change."""

    facts_id: int
    curve_id: int
    last_quantity_id: int | None
    source: int


def standings(session: Session, numbers: Collection[int] | None = None) -> dict[int, Standing]:
    """What is in force of each run; all runs where ``numbers`` is None."""
    used, curve, run = aliased(tables.Curve), aliased(tables.Curve), tables.Run
    source = func.coalesce(used.run_id, run.id)
    rows = session.execute(
        select(run.id, tables.RunFacts.id, curve.id, source)
        .join(tables.RunFacts, tables.RunFacts.run_id == run.id)
        .outerjoin(used, used.id == run.curve_id)
        .join(curve, curve.run_id == source)
        .where(tables.is_current(tables.RunFacts), tables.is_current(curve), among(run.id, numbers))
    ).all()
    last = _last_quantities(session, numbers)
    return {number: Standing(facts, held, last.get(number), origin) for number, facts, held, origin in rows}


def review_states(session: Session, numbers: Collection[int] | None = None) -> dict[int, ReviewState]:
    """State of the review of each run; all runs where ``numbers`` is None."""
    standing = standings(session, numbers)
    missing = {s.source for s in standing.values()} - set(standing)
    whole = standing | (standings(session, missing) if missing else {})
    reviews = _latest_reviews(session, None if numbers is None else whole)
    own = {number: _state(reviews.get(number), held) for number, held in whole.items()}
    return {number: _with_source(own[number], own[held.source]) for number, held in standing.items()}


def review_state(session: Session, number: int) -> ReviewState:
    """State of the review of one run."""
    return review_states(session, (number,))[number]


def among(column: InstrumentedAttribute[int], numbers: Collection[int] | None) -> ColumnElement[bool]:
    """Condition for a query: the column names one of these runs; all where ``numbers`` is None."""
    return true() if numbers is None else column.in_(numbers)


def _last_quantities(session: Session, numbers: Collection[int] | None) -> dict[int, int]:
    row = tables.QuantityRow
    query = select(row.run_id, func.max(row.id)).where(among(row.run_id, numbers)).group_by(row.run_id)
    return {row[0]: row[1] for row in session.execute(query)}


def _latest_reviews(session: Session, numbers: Collection[int] | None) -> Mapping[int, tables.Review]:
    query = select(tables.Review).where(
        tables.is_current(tables.Review), among(tables.Review.run_id, numbers)
    )
    return {review.run_id: review for review in session.scalars(query)}


def _state(review: tables.Review | None, held: Standing) -> ReviewState:
    if review is None:
        return NO_REVIEW
    seen = (review.facts_id, review.curve_id, review.last_quantity_id)
    same = seen == (held.facts_id, held.curve_id, held.last_quantity_id)
    state = review.decision if same else CHANGED
    return ReviewState(state, review.id, review.by, review.at, review.comment, review.own_work)


def _with_source(own: ReviewState, source: ReviewState) -> ReviewState:
    """Unknowns read on the curve of another run are approved only while that run is."""
    if not own.approved or source.approved:
        return own
    return ReviewState(CURVE_OPEN, own.review_id, own.by, own.at, own.comment, own.own_work)
