"""Lots of standard material, and the solutions prepared from them."""

from datetime import date, datetime

from sqlalchemy import CheckConstraint, ForeignKey
from sqlalchemy.orm import Mapped, mapped_column

from calib.store.base import Base, evidence, one_of, refers_to

VOLUME_UNITS = ("uL", "mL", "L", "mg", "g", "kg")


class StandardLot(Base):
    """A lot with the value, expanded uncertainty and coverage factor of its certificate."""

    __tablename__ = "standard_lot"
    __table_args__ = evidence()

    id: Mapped[int] = mapped_column(primary_key=True)
    name: Mapped[str] = mapped_column(unique=True)
    material: Mapped[str]
    certified_value: Mapped[float | None]
    unit: Mapped[str | None]
    expanded_uncertainty: Mapped[float | None]
    coverage_factor: Mapped[float | None]
    expiry: Mapped[date | None]
    supplier: Mapped[str | None]
    certificate: Mapped[str | None]
    traceability: Mapped[str | None]
    added_at: Mapped[datetime]
    added_by: Mapped[str]
    degrees_of_freedom: Mapped[float | None]


class Preparation(Base):
    """A solution prepared from a lot or from another prepared solution.

    ``taken`` of the parent was made up to ``made_up_to``, both in ``unit`` with their standard
    uncertainties. ``lot_id`` is the lot at the root of the tree; ``parent_id`` is null where the
    solution was prepared from that lot itself.
    """

    __tablename__ = "preparation"
    __table_args__ = evidence(
        one_of("unit", VOLUME_UNITS),
        CheckConstraint('"taken" > 0 AND "taken" <= "made_up_to"', name="taken"),
        CheckConstraint('"taken_u" >= 0 AND "made_up_to_u" >= 0', name="u"),
    )

    id: Mapped[int] = mapped_column(primary_key=True)
    name: Mapped[str] = mapped_column(unique=True)
    lot_id: Mapped[int] = refers_to("standard_lot")
    parent_id: Mapped[int | None] = refers_to("preparation")
    taken: Mapped[float]
    taken_u: Mapped[float]
    made_up_to: Mapped[float]
    made_up_to_u: Mapped[float]
    unit: Mapped[str]
    prepared_on: Mapped[date]
    prepared_by: Mapped[str]
    expiry: Mapped[date | None]
    added_at: Mapped[datetime]
    added_by: Mapped[str]


class PreparationCheck(Base):
    """A second person's confirmation of a preparation."""

    __tablename__ = "preparation_check"
    __table_args__ = evidence()

    id: Mapped[int] = mapped_column(primary_key=True)
    preparation_id: Mapped[int] = mapped_column(
        ForeignKey("preparation.id", ondelete="RESTRICT"), unique=True
    )
    by: Mapped[str]
    at: Mapped[datetime]


class RunSolution(Base):
    """The prepared solution the standards of a run were made from, beside the facts of the run."""

    __tablename__ = "run_solution"
    __table_args__ = evidence()

    id: Mapped[int] = mapped_column(primary_key=True)
    facts_id: Mapped[int] = mapped_column(ForeignKey("run_facts.id", ondelete="RESTRICT"), unique=True)
    preparation_id: Mapped[int] = refers_to("preparation")
