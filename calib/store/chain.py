"""The record chain: one entry per change, each bound to the one before it.

The chain shows that something was changed afterwards; it cannot stop a person who
rewrites all of it. That is why its head is printed on reports.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from datetime import UTC, datetime
from typing import Any

from sqlalchemy import Connection, Table, Text, insert, select
from sqlalchemy.orm import Mapped, mapped_column

from calib.store.base import Base, evidence
from calib.store.digests import canonical_json, sha256, stored_digests

GENESIS = "0" * 64


class ChainEntry(Base):
    """Who did what, when and why, the rows that came with it, and the hash of it all.

    The order is ``sequence``, not the time: a clock may be wrong, and an entry whose
    clock is behind the previous entry says so in ``clock_behind``.
    """

    __tablename__ = "record_chain"
    __table_args__ = evidence()

    sequence: Mapped[int] = mapped_column(primary_key=True)
    at: Mapped[datetime]
    offset_minutes: Mapped[int]
    by: Mapped[str]
    action: Mapped[str]
    reason: Mapped[str | None]
    payload: Mapped[str] = mapped_column(Text)
    previous_hash: Mapped[str]
    hash: Mapped[str] = mapped_column(unique=True)
    clock_behind: Mapped[bool]


@dataclass(frozen=True, slots=True)
class Head:
    """The last entry of the chain; ``sequence`` 0 and ``at`` None before the first."""

    sequence: int
    hash: str
    at: datetime | None


@dataclass(frozen=True, slots=True)
class Deed:
    """What was done, by whom, why, and when by the local clock."""

    action: str
    by: str
    reason: str | None
    at: datetime


_CHAIN = Base.metadata.tables["record_chain"]


def entry_hash(previous_hash: str, entry: Mapping[str, Any]) -> str:
    """SHA-256 of the previous hash and the canonical JSON of an entry.

    Parameters
    ----------
    previous_hash : str
        Hash of the entry before, ``GENESIS`` for the first.
    entry : mapping
        The columns of the entry; ``hash`` and ``previous_hash`` are left aside.
    """
    facts = {name: value for name, value in entry.items() if name not in ("hash", "previous_hash")}
    facts["at"] = facts["at"].astimezone(UTC).isoformat()
    return sha256((previous_hash + canonical_json(facts)).encode())


def chain_head(connection: Connection) -> Head:
    """Read the last entry of the chain."""
    columns = _CHAIN.c
    query = select(columns.sequence, columns.hash, columns.at).order_by(columns.sequence.desc()).limit(1)
    last = connection.execute(query).one_or_none()
    return Head(0, GENESIS, None) if last is None else Head(last.sequence, last.hash, last.at)


def append_entry(connection: Connection, deed: Deed, added: Mapping[Table, Sequence[int]]) -> None:
    """Write the entry for rows that were just added, in their own transaction.

    Parameters
    ----------
    connection : Connection
        Inside the transaction that holds the write lock, so that the head cannot move.
    deed : Deed
        Who, what, why and when.
    added : mapping
        Table to the keys of its new rows. Digests are taken from the rows as the
        database holds them, not as they were handed in.
    """
    last = chain_head(connection)
    entry = {
        "sequence": last.sequence + 1,
        "at": deed.at.astimezone(UTC),
        "offset_minutes": _offset_minutes(deed.at),
        "by": deed.by,
        "action": deed.action,
        "reason": deed.reason,
        "payload": _payload(connection, deed.action, added),
        "clock_behind": last.at is not None and deed.at < last.at,
        "previous_hash": last.hash,
    }
    connection.execute(insert(_CHAIN).values(**entry, hash=entry_hash(last.hash, entry)))


def _offset_minutes(at: datetime) -> int:
    offset = at.utcoffset()
    return 0 if offset is None else round(offset.total_seconds() / 60)


def _payload(connection: Connection, action: str, added: Mapping[Table, Sequence[int]]) -> str:
    rows = [
        {"table": table.name, "id": key, "digest": digest}
        for table, keys in sorted(added.items(), key=lambda item: item[0].name)
        for key, digest in sorted(stored_digests(connection, table, keys).items())
    ]
    return canonical_json({"action": action, "rows": rows})
