"""Lots of standard material."""

from datetime import date, datetime

from sqlalchemy.orm import Mapped, mapped_column

from calib.store.base import Base, evidence


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
