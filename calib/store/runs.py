"""Runs: what was measured, the facts about it, its readings and their exclusion."""

from datetime import datetime

from sqlalchemy import CheckConstraint, ForeignKey, Index
from sqlalchemy.orm import Mapped, mapped_column

from calib.store.base import Base, evidence, one_of, refers_to, superseded_row

RUN_KINDS = ("calibration", "unknowns")
ROLES = (
    "blank",
    "zero",
    "standard",
    "anchor",
    "first-check",
    "check",
    "control",
    "carry-over",
    "unknown",
)
ABSENT_CAUSES = ("overflow", "not detected", "instrument error", "empty")
EXCLUSION_DECISIONS = ("exclude", "restore")
REASON_CLASSES = ("assignable cause", "outlying", "other")


class Run(Base):
    """One analyte of one file under one method version.

    ``curve_id`` names the curve used by a run of unknowns that has none of its own.
    """

    __tablename__ = "run"
    __table_args__ = evidence(one_of("kind", RUN_KINDS))

    id: Mapped[int] = mapped_column(primary_key=True)
    kind: Mapped[str]
    original_id: Mapped[int] = refers_to("original")
    method_id: Mapped[int] = refers_to("method")
    layout: Mapped[str]
    reader_version: Mapped[str]
    concentration_unit: Mapped[str]
    response_unit: Mapped[str]
    content_fingerprint: Mapped[str] = mapped_column(index=True)
    # use_alter: run and curve name each other, so one of the two has to be left out when tables are sorted.
    curve_id: Mapped[int | None] = mapped_column(
        ForeignKey("curve.id", ondelete="RESTRICT", use_alter=True), index=True
    )
    logged_at: Mapped[datetime]
    logged_by: Mapped[str]


class RunFacts(Base):
    """Who ran what, where and when; an amendment is a new row with a reason."""

    __tablename__ = "run_facts"
    __table_args__ = evidence(
        CheckConstraint('"supersedes" IS NULL OR "reason" IS NOT NULL', name="reason"),
        Index(None, "instrument_id", "at"),
    )

    id: Mapped[int] = mapped_column(primary_key=True)
    run_id: Mapped[int] = refers_to("run")
    instrument_id: Mapped[int] = refers_to("instrument")
    lot_id: Mapped[int | None] = refers_to("standard_lot")
    at: Mapped[datetime]
    offset_minutes: Mapped[int]
    operator: Mapped[str]
    supersedes: Mapped[int | None] = superseded_row("run_facts")
    reason: Mapped[str | None]
    by: Mapped[str]
    recorded_at: Mapped[datetime]


class RunVoid(Base):
    """The decision that a run counts no longer; the run itself stays."""

    __tablename__ = "run_void"
    __table_args__ = evidence()

    id: Mapped[int] = mapped_column(primary_key=True)
    run_id: Mapped[int] = mapped_column(ForeignKey("run.id", ondelete="RESTRICT"), unique=True)
    reason: Mapped[str]
    by: Mapped[str]
    at: Mapped[datetime]


class Reading(Base):
    """One recorded response, or the cause of its absence; the text is as in the file.

    ``internal_standard`` is the response of the internal standard in the same reading.
    """

    __tablename__ = "reading"
    __table_args__ = evidence(
        one_of("role", ROLES),
        one_of("absent_cause", ABSENT_CAUSES),
        CheckConstraint('("response" IS NULL) <> ("absent_cause" IS NULL)', name="response_or_cause"),
        CheckConstraint('"dilution" > 0', name="dilution"),
        Index(None, "run_id", "ordinal"),
    )

    id: Mapped[int] = mapped_column(primary_key=True)
    run_id: Mapped[int] = mapped_column(ForeignKey("run.id", ondelete="RESTRICT"))
    ordinal: Mapped[int]
    sample: Mapped[str] = mapped_column(index=True)
    role: Mapped[str]
    concentration: Mapped[float | None]
    response: Mapped[float | None]
    response_text: Mapped[str]
    absent_cause: Mapped[str | None]
    replicate: Mapped[int | None]
    dilution: Mapped[float]
    position: Mapped[str | None]
    at: Mapped[datetime | None]
    sheet: Mapped[str | None]
    row: Mapped[int | None]
    column: Mapped[str | None]
    internal_standard: Mapped[float | None]
    supersedes: Mapped[int | None] = superseded_row("reading")


class Exclusion(Base):
    """The decision to leave a reading out of the fit, or to take it back in, with its reason."""

    __tablename__ = "exclusion"
    __table_args__ = evidence(one_of("decision", EXCLUSION_DECISIONS), one_of("reason_class", REASON_CLASSES))

    id: Mapped[int] = mapped_column(primary_key=True)
    reading_id: Mapped[int] = refers_to("reading")
    decision: Mapped[str]
    reason_class: Mapped[str]
    reason: Mapped[str]
    by: Mapped[str]
    at: Mapped[datetime]
    supersedes: Mapped[int | None] = superseded_row("exclusion")


class RuleOverride(Base):
    """A decision to log a run against a rule, with what the rule found and the reason."""

    __tablename__ = "rule_override"
    __table_args__ = evidence()

    id: Mapped[int] = mapped_column(primary_key=True)
    run_id: Mapped[int] = refers_to("run")
    what: Mapped[str]
    reason: Mapped[str]
    by: Mapped[str]
    at: Mapped[datetime]
