"""What a second person decided about a run, and the reports that were issued of it."""

from datetime import datetime
from typing import Any

from sqlalchemy import CheckConstraint, ForeignKey
from sqlalchemy.orm import Mapped, mapped_column

from calib.store.base import Base, evidence, one_of, refers_to, superseded_row

REVIEW_DECISIONS = ("approved", "returned")
REPORT_FORMATS = ("html", "json", "csv")


class Review(Base):
    """A decision about a run as it stood: it lapses when a later row supersedes what it names.

    ``exceptions`` are those the reviewer was shown; ``own_work`` says that the reviewer
    had a hand in the run, which a setting allowed.
    """

    __tablename__ = "review"
    __table_args__ = evidence(
        one_of("decision", REVIEW_DECISIONS),
        CheckConstraint('"decision" = \'approved\' OR "comment" IS NOT NULL', name="comment"),
    )

    id: Mapped[int] = mapped_column(primary_key=True)
    run_id: Mapped[int] = refers_to("run")
    decision: Mapped[str]
    facts_id: Mapped[int] = refers_to("run_facts")
    curve_id: Mapped[int] = refers_to("curve")
    last_quantity_id: Mapped[int | None] = mapped_column(ForeignKey("quantity.id", ondelete="RESTRICT"))
    exceptions: Mapped[list[Any]]
    own_work: Mapped[bool]
    comment: Mapped[str | None]
    supersedes: Mapped[int | None] = superseded_row("review")
    by: Mapped[str]
    at: Mapped[datetime]


class IssuedReport(Base):
    """A report that left the laboratory: its number is ``id``, its bytes have this fingerprint.

    ``chain_sequence`` and ``chain_head`` are those printed on it.
    """

    __tablename__ = "issued_report"
    __table_args__ = evidence(
        one_of("format", REPORT_FORMATS),
        CheckConstraint('"supersedes" IS NULL OR "reason" IS NOT NULL', name="reason"),
    )

    id: Mapped[int] = mapped_column(primary_key=True)
    run_id: Mapped[int] = refers_to("run")
    review_id: Mapped[int] = refers_to("review")
    format: Mapped[str]
    fingerprint: Mapped[str] = mapped_column(index=True)
    size: Mapped[int]
    chain_sequence: Mapped[int]
    chain_head: Mapped[str]
    supersedes: Mapped[int | None] = superseded_row("issued_report")
    reason: Mapped[str | None]
    by: Mapped[str]
    at: Mapped[datetime]
    offset_minutes: Mapped[int]
