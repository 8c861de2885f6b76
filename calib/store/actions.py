"""Corrective actions with the results they affect, and verifications of the installation."""

from datetime import datetime
from typing import Any

from sqlalchemy import ForeignKey, UniqueConstraint
from sqlalchemy.orm import Mapped, mapped_column

from calib.store.base import Base, evidence, refers_to


class Action(Base):
    """Something that went wrong, and what it is about; open until a closure names it.

    ``kind`` and ``name`` say what the affected results were traced from, such as a lot;
    ``since`` and ``until`` narrow it to runs measured from then on, and up to then.
    """

    __tablename__ = "action"
    __table_args__ = evidence()

    id: Mapped[int] = mapped_column(primary_key=True)
    what: Mapped[str]
    kind: Mapped[str]
    name: Mapped[str]
    since: Mapped[datetime | None]
    until: Mapped[datetime | None]
    by: Mapped[str]
    at: Mapped[datetime]


class ActionResult(Base):
    """A result that was affected when the action was opened."""

    __tablename__ = "action_result"
    __table_args__ = evidence(UniqueConstraint("action_id", "quantity_id"))

    id: Mapped[int] = mapped_column(primary_key=True)
    action_id: Mapped[int] = refers_to("action")
    quantity_id: Mapped[int] = refers_to("quantity")


class ActionClosure(Base):
    """What was done about an action, and how it is known to have helped."""

    __tablename__ = "action_closure"
    __table_args__ = evidence()

    id: Mapped[int] = mapped_column(primary_key=True)
    action_id: Mapped[int] = mapped_column(ForeignKey("action.id", ondelete="RESTRICT"), unique=True)
    correction: Mapped[str]
    effect: Mapped[str]
    by: Mapped[str]
    at: Mapped[datetime]


class Verification(Base):
    """Published check values computed again on one installation, with what came out."""

    __tablename__ = "verification"
    __table_args__ = evidence()

    id: Mapped[int] = mapped_column(primary_key=True)
    passed: Mapped[bool]
    values: Mapped[list[Any]]
    versions: Mapped[dict[str, Any]]
    platform: Mapped[str]
    by: Mapped[str]
    at: Mapped[datetime]
    offset_minutes: Mapped[int]
