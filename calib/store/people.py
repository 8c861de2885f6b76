"""People with their roles, and the settings of the laboratory; each change is a new version."""

from datetime import datetime

from sqlalchemy import CheckConstraint
from sqlalchemy.orm import Mapped, mapped_column

from calib.store.base import Base, evidence, one_of, superseded_row

SETTINGS = ("own-work", "late-after")


class Person(Base):
    """A person by the name used with ``--by``, and what they may do; both false: they left."""

    __tablename__ = "person"
    __table_args__ = evidence(
        CheckConstraint('"supersedes" IS NULL OR "reason" IS NOT NULL', name="reason"),
    )

    id: Mapped[int] = mapped_column(primary_key=True)
    name: Mapped[str] = mapped_column(index=True)
    analyst: Mapped[bool]
    reviewer: Mapped[bool]
    supersedes: Mapped[int | None] = superseded_row("person")
    reason: Mapped[str | None]
    by: Mapped[str]
    at: Mapped[datetime]


class Setting(Base):
    """A rule of the laboratory about its records, with the reason it was set for."""

    __tablename__ = "setting"
    __table_args__ = evidence(one_of("name", SETTINGS))

    id: Mapped[int] = mapped_column(primary_key=True)
    name: Mapped[str]
    value: Mapped[str]
    supersedes: Mapped[int | None] = superseded_row("setting")
    reason: Mapped[str]
    by: Mapped[str]
    at: Mapped[datetime]
