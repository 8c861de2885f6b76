"""Quantities: what an unknown, a check or a control was found to be."""

from datetime import datetime
from typing import Any

from sqlalchemy import CheckConstraint
from sqlalchemy.orm import Mapped, mapped_column

from calib.store.base import Base, evidence, one_of, refers_to, superseded_row
from calib.store.runs import ROLES

STATES = ("ok", "asymmetric", "open-above", "open-below", "no-estimate", "off-curve")
POSITIONS = ("inside", "above", "below")
KINDS = ("curve only", "combined")


class QuantityRow(Base):
    """A back-calculated quantity in ``unit``, after dilution, with its uncertainty and budget.

    An end of the interval that is open is null, with ``upper_open`` for the upper one.
    """

    __tablename__ = "quantity"
    __table_args__ = evidence(
        one_of("role", ROLES),
        one_of("state", STATES),
        one_of("position", POSITIONS),
        one_of("kind", KINDS),
        CheckConstraint('"dilution" > 0', name="dilution"),
        CheckConstraint('"confidence" > 0 AND "confidence" < 1', name="confidence"),
    )

    id: Mapped[int] = mapped_column(primary_key=True)
    run_id: Mapped[int] = refers_to("run")
    curve_id: Mapped[int] = refers_to("curve")
    sample: Mapped[str] = mapped_column(index=True)
    role: Mapped[str]
    nominal: Mapped[float | None]
    replicates: Mapped[int]
    mean_response: Mapped[float | None]
    concentration: Mapped[float | None]
    u: Mapped[float | None]
    k: Mapped[float | None]
    expanded: Mapped[float | None]
    lower: Mapped[float | None]
    upper: Mapped[float | None]
    upper_open: Mapped[bool]
    confidence: Mapped[float]
    kind: Mapped[str]
    degrees_of_freedom: Mapped[float | None]
    state: Mapped[str]
    position: Mapped[str | None]
    flags: Mapped[list[Any]]
    dilution: Mapped[float]
    unit: Mapped[str]
    budget: Mapped[dict[str, Any]]
    supersedes: Mapped[int | None] = superseded_row("quantity")


class UncertaintyBasisRow(Base):
    """What was known beside reading and curve when a run was quantified, and what was left out.

    ``components`` hold every figure the combined uncertainty rests on, ``runs`` the numbers of the
    past runs they were estimated from, ``left_out`` sentences.
    """

    __tablename__ = "uncertainty_basis"
    __table_args__ = evidence()

    id: Mapped[int] = mapped_column(primary_key=True)
    run_id: Mapped[int] = refers_to("run")
    components: Mapped[list[Any]]
    left_out: Mapped[list[Any]]
    runs: Mapped[list[Any]]
    by: Mapped[str]
    at: Mapped[datetime]
    supersedes: Mapped[int | None] = superseded_row("uncertainty_basis")
