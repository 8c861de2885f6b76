"""Fingerprints of rows, taken from what the database holds."""

import hashlib
import json
from collections.abc import Iterator, Mapping, Sequence
from datetime import UTC, date, datetime
from typing import Any

from sqlalchemy import Column, Connection, LargeBinary, Row, Table, select

ROWS_AT_ONCE = 500
FILES_AT_ONCE = 4


def canonical_json(value: Any) -> str:
    """Write a value as JSON in one way only: sorted keys, no spaces, ASCII, no NaN.

    Raises
    ------
    ValueError
        If the value holds NaN or an infinity.
    """
    return json.dumps(value, sort_keys=True, separators=(",", ":"), ensure_ascii=True, allow_nan=False)


def sha256(content: bytes) -> str:
    """SHA-256 of bytes in hexadecimal."""
    return hashlib.sha256(content).hexdigest()


def row_digest(row: Mapping[str, Any]) -> str:
    """Digest of one stored row: SHA-256 of its canonical JSON.

    Parameters
    ----------
    row : mapping
        Column name to value as read back from the database. Missing values are
        left out, so that a later version may add a column that is null in older
        rows without making their digests void.

    Returns
    -------
    str
        Hexadecimal digest.
    """
    held = {name: _plain(value) for name, value in row.items() if value is not None}
    return sha256(canonical_json(held).encode())


def _plain(value: Any) -> Any:
    if isinstance(value, bytes):
        return sha256(value)
    if isinstance(value, datetime):
        return value.astimezone(UTC).isoformat()
    if isinstance(value, date):
        return value.isoformat()
    return value


def key_of(table: Table) -> Column[Any]:
    """Give the one primary key column of a table."""
    (key,) = table.primary_key.columns
    return key


def batches(table: Table, keys: Sequence[int]) -> Iterator[Sequence[int]]:
    """Cut a list of keys into pieces that fit into memory with all their columns."""
    holds_files = any(isinstance(column.type, LargeBinary) for column in table.columns)
    size = FILES_AT_ONCE if holds_files else ROWS_AT_ONCE
    for start in range(0, len(keys), size):
        yield keys[start : start + size]


def stored_rows(connection: Connection, table: Table, keys: Sequence[int]) -> Sequence[Row[Any]]:
    """Read rows by key, all columns, in the order of the key."""
    key = key_of(table)
    return connection.execute(select(table).where(key.in_(keys)).order_by(key)).all()


def stored_digests(connection: Connection, table: Table, keys: Sequence[int]) -> dict[int, str]:
    """Digest of each stored row by its key."""
    return {
        row._mapping[key_of(table)]: row_digest({str(name): value for name, value in row._mapping.items()})
        for some in batches(table, keys)
        for row in stored_rows(connection, table, some)
    }
