"""Instruments and what happened to them."""

from datetime import datetime

from sqlalchemy import Index
from sqlalchemy.orm import Mapped, mapped_column

from calib.store.base import Base, evidence, one_of, refers_to

EVENT_KINDS = ("maintenance", "part", "move", "software", "lot", "other")


class Instrument(Base):
    """An instrument of the laboratory.

    ``response_ceiling`` is the response at which its detector saturates, in the
    unit of its readings; ``utc_offset_minutes`` the offset of its clock.
    """

    __tablename__ = "instrument"
    __table_args__ = evidence()

    id: Mapped[int] = mapped_column(primary_key=True)
    name: Mapped[str] = mapped_column(unique=True)
    kind: Mapped[str]
    serial: Mapped[str]
    location: Mapped[str]
    response_ceiling: Mapped[float | None]
    utc_offset_minutes: Mapped[int]
    added_at: Mapped[datetime]
    added_by: Mapped[str]


class Event(Base):
    """A dated cause: service, a new part, a move, new software, a new lot."""

    __tablename__ = "event"
    __table_args__ = evidence(one_of("kind", EVENT_KINDS), Index(None, "instrument_id", "at"))

    id: Mapped[int] = mapped_column(primary_key=True)
    instrument_id: Mapped[int] = refers_to("instrument")
    at: Mapped[datetime]
    offset_minutes: Mapped[int]
    kind: Mapped[str]
    what: Mapped[str]
    by: Mapped[str]
    recorded_at: Mapped[datetime]
