"""The open archive of a store: a zip of JSON lines and original files, each with its fingerprint.

Members:

- ``README.txt``: this description in short;
- ``manifest.json``: format, schema, head of the record chain, and of every other member its
  size and SHA-256, of every table its number of rows;
- ``tables/NAME.jsonl``: the rows of one table in the order of their number, one JSON object a
  line, keys as the columns; a missing value is left out, times are ISO 8601 in UTC, numbers
  have every digit, and a column of bytes names the member that holds them;
- ``originals/SHA-256``: the bytes of the files as they came from the instruments.

Digests in ``record_chain`` are SHA-256 of the canonical JSON of a row (sorted keys, no spaces,
ASCII, missing values left out), so another program can check the chain too.
"""

import json
from collections.abc import Mapping
from datetime import date, datetime
from typing import Any

from sqlalchemy import Column, Date, LargeBinary, Table

from calib.store.base import Base, UtcDateTime
from calib.store.digests import sha256
from calib.store.triggers import EVIDENCE_TABLES

FORMAT = "calib-archive-1"
MANIFEST = "manifest.json"
NOTE = "README.txt"
# Parents before children, as far as tables that name each other allow.
TABLES = tuple(table for table in Base.metadata.sorted_tables if table.name in EVIDENCE_TABLES)


def member_of(table: Table) -> str:
    """Name of the member that holds the rows of a table."""
    return f"tables/{table.name}.jsonl"


def member_of_bytes(content: bytes) -> str:
    """Name of the member that holds the bytes of a file."""
    return f"originals/{sha256(content)}"


def encode(row: Mapping[str, Any]) -> str:
    """One row as a line of JSON, with every digit; bytes are named, not held."""
    held = {name: _encoded(value) for name, value in row.items() if value is not None}
    return json.dumps(held, sort_keys=True, ensure_ascii=False, allow_nan=False)


def decode(table: Table, line: str, bytes_of: Mapping[str, bytes]) -> dict[str, Any]:
    """The row that a line stands for; columns that are left out are None.

    Raises
    ------
    ValueError, KeyError, TypeError
        If the line is no row of the table.
    """
    held = json.loads(line)
    unknown = set(held) - set(table.columns.keys())
    if unknown:
        raise KeyError(f"the table has no column {', '.join(sorted(unknown))}")
    return {column.name: _decoded(column, held.get(column.name), bytes_of) for column in table.columns}


def _encoded(value: Any) -> Any:
    if isinstance(value, bytes):
        return member_of_bytes(value)
    if isinstance(value, datetime | date):
        return value.isoformat()
    return value


def _decoded(column: Column[Any], value: Any, bytes_of: Mapping[str, bytes]) -> Any:
    if value is None:
        return None
    if isinstance(column.type, LargeBinary):
        return bytes_of[value]
    if isinstance(column.type, UtcDateTime):
        return datetime.fromisoformat(value)
    if isinstance(column.type, Date):
        return date.fromisoformat(value)
    return value
