"""The files as they came from the instrument."""

from datetime import datetime

from sqlalchemy.orm import Mapped, mapped_column

from calib.store.base import Base, evidence


class Original(Base):
    """The bytes of one file; ``fingerprint`` is their SHA-256 in hexadecimal."""

    __tablename__ = "original"
    __table_args__ = evidence()

    id: Mapped[int] = mapped_column(primary_key=True)
    fingerprint: Mapped[str] = mapped_column(unique=True)
    name: Mapped[str]
    size: Mapped[int]
    content: Mapped[bytes]
    imported_at: Mapped[datetime]
