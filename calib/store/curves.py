"""Curves, the standards behind them, and the verdict on them."""

from datetime import datetime
from typing import Any

from sqlalchemy import ForeignKey
from sqlalchemy.orm import Mapped, mapped_column

from calib.store.base import Base, evidence, one_of, refers_to, superseded_row

DECISIONS = ("accepted", "accepted with exclusions", "rejected")


class Curve(Base):
    """A fitted curve as it was computed: estimates, covariance, the noise model it used.

    ``parameters`` maps names to values, ``covariance`` is a list of rows in the
    same order; a cell that is undefined is null. ``undetermined`` names parameters
    without a standard error. ``noise_from`` lists run and curve of each past run
    a noise model was pooled over, ``outlying`` is the reading proposed to be left out,
    with the effect it would have. ``lowest`` and ``highest`` are
    the calibrated range in the run's concentration unit.
    """

    __tablename__ = "curve"
    __table_args__ = evidence()

    id: Mapped[int] = mapped_column(primary_key=True)
    run_id: Mapped[int] = refers_to("run")
    model: Mapped[str]
    fixed: Mapped[dict[str, Any]]
    bounds: Mapped[dict[str, Any]]
    noise: Mapped[dict[str, Any]]
    noise_from: Mapped[list[Any] | None]
    outlying: Mapped[dict[str, Any] | None]
    parameters: Mapped[dict[str, Any]]
    covariance: Mapped[list[Any]]
    undetermined: Mapped[list[Any]]
    residual_sum: Mapped[float | None]
    residual_sd: Mapped[float | None]
    degrees_of_freedom: Mapped[float]
    r_squared: Mapped[float | None]
    aicc: Mapped[float | None]
    converged: Mapped[bool]
    findings: Mapped[list[Any]]
    solver: Mapped[str]
    versions: Mapped[dict[str, Any]]
    lowest: Mapped[float | None]
    highest: Mapped[float | None]
    supersedes: Mapped[int | None] = superseded_row("curve")
    reason: Mapped[str | None]
    by: Mapped[str]
    at: Mapped[datetime]


class CurveStandard(Base):
    """One standard reading of a curve, back-calculated; ``relative_error`` is a fraction."""

    __tablename__ = "curve_standard"
    __table_args__ = evidence()

    id: Mapped[int] = mapped_column(primary_key=True)
    curve_id: Mapped[int] = refers_to("curve")
    reading_id: Mapped[int] = refers_to("reading")
    fitted: Mapped[bool]
    back_calculated: Mapped[float | None]
    relative_error: Mapped[float | None]
    excluded: Mapped[bool]
    reason: Mapped[str | None]


class VerdictRow(Base):
    """The verdict on one curve, with every criterion that was judged."""

    __tablename__ = "verdict"
    __table_args__ = evidence(one_of("decision", DECISIONS))

    id: Mapped[int] = mapped_column(primary_key=True)
    curve_id: Mapped[int] = mapped_column(ForeignKey("curve.id", ondelete="RESTRICT"), unique=True)
    decision: Mapped[str]
    criteria: Mapped[list[Any]]
    lowest: Mapped[float | None]
    highest: Mapped[float | None]
    r_squared: Mapped[float | None]
    by: Mapped[str]
    at: Mapped[datetime]
