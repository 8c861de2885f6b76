"""Heads of the record chain that were kept elsewhere: on issued reports, in a file, on paper.

A chain alone does not show that all of it was written anew. A head kept where the writer
of the store cannot reach it does: the entry of that number must still have that hash.
"""

import json
import re
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path

from sqlalchemy import Connection, select

from calib.errors import InputError
from calib.store.base import Base
from calib.store.findings import StoreFinding

SCHEMA = "calib-head-1"
WRITTEN = re.compile(r"^(\d{1,18}):([0-9a-f]{64})$")

_CHAIN = Base.metadata.tables["record_chain"]
_REPORTS = Base.metadata.tables["issued_report"]


@dataclass(frozen=True, slots=True)
class KeptHead:
    """Number and hash of an entry, and where it was kept."""

    sequence: int
    hash: str
    where: str


def read_head(text: str) -> KeptHead:
    """A head as written NUMBER:HASH, or the file that ``store head --to`` wrote.

    Raises
    ------
    InputError
        If it is neither.
    """
    match = WRITTEN.match(text.strip())
    if match:
        return KeptHead(int(match[1]), match[2], "the head that was given")
    try:
        held = json.loads(Path(text).expanduser().read_text(encoding="utf-8"))
        kept = KeptHead(int(held["sequence"]), str(held["hash"]), f"the head kept in {text}")
        if held["schema"] != SCHEMA or not WRITTEN.match(f"{kept.sequence}:{kept.hash}"):
            raise ValueError("another schema")
    except (OSError, ValueError, KeyError, TypeError) as cause:
        raise InputError(
            f"{text} is no head of a record chain: write NUMBER:HASH as on a report, or name the file "
            "that calib store head --to wrote"
        ) from cause
    return kept


def head_findings(connection: Connection, kept: Sequence[KeptHead]) -> Iterator[StoreFinding]:
    """Compare heads kept elsewhere, and those printed on issued reports, with the chain."""
    printed = select(_REPORTS.c.id, _REPORTS.c.chain_sequence, _REPORTS.c.chain_head)
    reports = [
        KeptHead(sequence, head, f"the head printed on report {number}")
        for number, sequence, head in connection.execute(printed)
    ]
    for each in (*kept, *reports):
        held = connection.scalar(select(_CHAIN.c.hash).where(_CHAIN.c.sequence == each.sequence))
        if held is None:
            message = f"{each.where} is not in the chain: entries were cut off"
        elif held != each.hash:
            message = f"{each.where} is another: the chain up to there was written anew"
        else:
            continue
        yield StoreFinding("head-differs", f"entry {each.sequence}", message, each.sequence)
