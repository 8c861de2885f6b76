"""Method definitions, versioned."""

from datetime import datetime

from sqlalchemy import Text, UniqueConstraint
from sqlalchemy.orm import Mapped, mapped_column

from calib.store.base import Base, evidence


class Method(Base):
    """One version of a method: its TOML text as it was added.

    ``preset`` is the text of the acceptance preset it named, as it was then, so that a later calib with
    other presets judges nothing anew; null in methods added before it was kept.
    """

    __tablename__ = "method"
    __table_args__ = evidence(UniqueConstraint("name", "version"))

    id: Mapped[int] = mapped_column(primary_key=True)
    name: Mapped[str]
    version: Mapped[int]
    definition: Mapped[str] = mapped_column(Text)
    fingerprint: Mapped[str]
    preset: Mapped[str | None] = mapped_column(Text)
    added_at: Mapped[datetime]
    added_by: Mapped[str]
