"""Which entry of the record chain holds a row."""

import json
from typing import Any

from sqlalchemy import Connection, select

from calib.store.base import Base
from calib.store.chain import chain_head

_CHAIN = Base.metadata.tables["record_chain"]


def entry_of(connection: Connection, table: str, key: int) -> int | None:
    """Find the entry that recorded a row, by halving: the numbers of a table rise along the chain.

    Parameters
    ----------
    connection : Connection
    table : str
        Name of the table.
    key : int
        Number of the row.

    Returns
    -------
    int or None
        Sequence number; None where no entry names the row.
    """
    low, high = 1, chain_head(connection).sequence
    while low <= high:
        middle = (low + high) // 2
        sequence, keys = _next_naming(connection, table, middle, high)
        if sequence is None or min(keys) > key:
            high = middle - 1
        elif max(keys) < key:
            low = sequence + 1
        else:
            return sequence if key in keys else None
    return None


def recorded_rows(connection: Connection, sequence: int) -> dict[str, set[int]]:
    """Numbers of the rows that one entry recorded, by table."""
    payload = connection.scalar(select(_CHAIN.c.payload).where(_CHAIN.c.sequence == sequence))
    rows: dict[str, set[int]] = {}
    for row in _listed(payload):
        rows.setdefault(row["table"], set()).add(row["id"])
    return rows


def _listed(payload: str | None) -> list[dict[str, Any]]:
    found = json.loads(payload) if payload else {}
    listed = found.get("rows", []) if isinstance(found, dict) else []
    return listed if isinstance(listed, list) else []


def _next_naming(connection: Connection, table: str, first: int, last: int) -> tuple[int | None, set[int]]:
    """The first entry from ``first`` to ``last`` that records rows of the table, and their numbers."""
    for sequence in range(first, last + 1):
        keys = recorded_rows(connection, sequence).get(table)
        if keys:
            return sequence, keys
    return None, {0}
