"""What a report says of its review: DRAFT until a second person approved the run as it stands."""

from __future__ import annotations

from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from calib.bench.records import ReportStamp
    from calib.bench.review_state import ReviewState


def status_line(review: ReviewState, stamp: ReportStamp | None = None) -> str:
    """One line: DRAFT and why, or who approved it, and the report's number and what it replaces."""
    if not review.approved:
        return f"DRAFT – {review.state}{_returned(review)}"
    line = f"approved by {review.by}, {review.at:%Y-%m-%d %H:%M} UTC{_own(review)}"
    if stamp is None:
        return line
    return f"report {stamp.number}{_replaces(stamp)}, {line}"


def _returned(review: ReviewState) -> str:
    return f" by {review.by}: {review.comment}" if review.state == "returned" else ""


def _own(review: ReviewState) -> str:
    return (
        ", who also had a hand in the run (a setting of the laboratory allows it)" if review.own_work else ""
    )


def _replaces(stamp: ReportStamp) -> str:
    return "" if stamp.replaces is None else f", replaces report {stamp.replaces} ({stamp.reason})"
