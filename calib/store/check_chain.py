"""Walk the record chain and compare every row with the digest it was recorded with."""

import json
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, field, replace
from datetime import datetime
from typing import Any

from sqlalchemy import Connection, Table, func, select

from calib.store.base import Base
from calib.store.chain import GENESIS, entry_hash
from calib.store.digests import key_of, row_digest, sha256
from calib.store.findings import DAMAGE, StoreFinding, Unreadable, one_line, read_each
from calib.store.triggers import EVIDENCE_TABLES

ROWS_TO_COMPARE_AT_ONCE = 5000

_CHAIN = Base.metadata.tables["record_chain"]
_RECORDED = tuple(name for name in EVIDENCE_TABLES if name != "record_chain")


def no_progress(_done: int, _total: int) -> None:
    """Show nothing."""


@dataclass(frozen=True, slots=True)
class _Recorded:
    """What an entry of the chain says of one row."""

    digest: str
    entry: int


@dataclass(slots=True)
class ChainWalk:
    """One walk from the first entry of the chain to its head.

    Attributes
    ----------
    sequence, hash : int, str
        The entry reached last.
    rows : int
        Rows compared so far.
    """

    progress: Callable[[int, int], None] = no_progress
    sequence: int = 0
    hash: str = GENESIS
    rows: int = 0
    entries: int = 0
    _at: datetime | None = None
    _total: int = 0
    _waiting: dict[str, dict[int, _Recorded]] = field(default_factory=dict)
    _seen: dict[str, set[int]] = field(default_factory=lambda: {name: set() for name in _RECORDED})

    def findings(self, connection: Connection) -> Iterator[StoreFinding]:
        """Walk the chain; yield what does not fit as it is met."""
        self._total = sum(_count(connection, Base.metadata.tables[name]) for name in _RECORDED)
        sequences = list(connection.scalars(select(_CHAIN.c.sequence).order_by(_CHAIN.c.sequence)))
        for sequence, entry in read_each(connection, _CHAIN, sequences):
            for finding in self._checked_entry(sequence, entry):
                yield replace(finding, entry=sequence)
            if sum(map(len, self._waiting.values())) >= ROWS_TO_COMPARE_AT_ONCE:
                yield from self._compare(connection)
        yield from self._compare(connection)
        yield from self._cut_off(connection)
        yield from self._unrecorded(connection)

    def _checked_entry(
        self, sequence: int, entry: Mapping[str, Any] | Unreadable | None
    ) -> Iterator[StoreFinding]:
        place = f"entry {sequence}"
        self.entries += 1
        if sequence != self.sequence + 1:
            yield StoreFinding("chain-gap", place, f"comes after entry {self.sequence}: entries are missing")
        self.sequence = sequence
        if entry is None or isinstance(entry, Unreadable):
            why = "it is gone" if entry is None else entry.why
            yield StoreFinding("chain-unreadable", place, f"cannot be read: {why}")
            return
        yield from self._links(place, entry)
        self.hash, self._at = entry["hash"], entry["at"]
        try:
            yield from self._expect(sequence, json.loads(entry["payload"]))
        except DAMAGE as error:
            yield StoreFinding("chain-payload", place, f"its list of rows cannot be read: {one_line(error)}")

    def _links(self, place: str, entry: Mapping[str, Any]) -> Iterator[StoreFinding]:
        if entry["previous_hash"] != self.hash:
            yield StoreFinding("chain-link", place, "does not follow from the entry before it")
        if entry_hash(entry["previous_hash"], entry) != entry["hash"]:
            yield StoreFinding("chain-hash", place, "was changed after it was written")
        behind = self._at is not None and entry["at"] < self._at
        if behind != entry["clock_behind"]:
            yield StoreFinding(
                "chain-clock", place, "says the wrong thing about its clock and the entry before it"
            )

    def _expect(self, entry: int, payload: Mapping[str, Any]) -> Iterator[StoreFinding]:
        for row in payload["rows"]:
            name, key, digest = row["table"], row["id"], row["digest"]
            if key in self._seen[name]:
                yield StoreFinding("row-twice", f"{name} {key}", f"is recorded again by entry {entry}")
            self._seen[name].add(key)
            self._waiting.setdefault(name, {})[key] = _Recorded(digest, entry)

    def _compare(self, connection: Connection) -> Iterator[StoreFinding]:
        waiting, self._waiting = self._waiting, {}
        for name, recorded in waiting.items():
            table = Base.metadata.tables[name]
            for key, row in read_each(connection, table, sorted(recorded)):
                for finding in _compare_row(name, key, row, recorded[key]):
                    yield replace(finding, entry=recorded[key].entry)
            self.rows += len(recorded)
            self.progress(min(self.rows, self._total), self._total)

    def _cut_off(self, connection: Connection) -> Iterator[StoreFinding]:
        # SQLite remembers the highest number it has given, also when the row is gone.
        query = "SELECT seq FROM sqlite_sequence WHERE name = 'record_chain'"
        given = connection.exec_driver_sql(query).scalar() or 0
        if given != self.sequence:
            yield StoreFinding(
                "chain-cut", f"entry {self.sequence}", f"is the last one, but {given} were written"
            )

    def _unrecorded(self, connection: Connection) -> Iterator[StoreFinding]:
        for name, seen in self._seen.items():
            key = key_of(Base.metadata.tables[name])
            for number in connection.scalars(select(key).order_by(key)):
                if number not in seen:
                    yield StoreFinding("row-unrecorded", f"{name} {number}", "is in no entry of the chain")


def _count(connection: Connection, table: Table) -> int:
    return connection.scalar(select(func.count()).select_from(table)) or 0


def _compare_row(
    name: str, key: int, row: Mapping[str, Any] | Unreadable | None, recorded: _Recorded
) -> Iterator[StoreFinding]:
    place = f"{name} {key}"
    if row is None:
        yield StoreFinding("row-missing", place, f"was recorded by entry {recorded.entry} and is gone")
    elif isinstance(digest := _digest(row), Unreadable):
        yield StoreFinding("row-unreadable", place, f"cannot be read: {digest.why}")
    elif digest != recorded.digest:
        yield StoreFinding("row-changed", place, f"is not as entry {recorded.entry} recorded it")
    if name == "original" and isinstance(row, Mapping):
        yield from _compare_original(place, row)


def _digest(row: Mapping[str, Any] | Unreadable) -> str | Unreadable:
    if isinstance(row, Unreadable):
        return row
    try:
        return row_digest(row)
    except DAMAGE as error:
        return Unreadable(one_line(error))


def _compare_original(place: str, row: Mapping[str, Any]) -> Iterator[StoreFinding]:
    content = row["content"]
    if sha256(content) != row["fingerprint"] or len(content) != row["size"]:
        yield StoreFinding(
            "original-changed", place, f"the bytes of {row['name']} do not fit their fingerprint"
        )
