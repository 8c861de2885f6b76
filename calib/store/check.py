"""Check a store from end to end: it reports, and never stops at damage."""

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from functools import partial

from sqlalchemy import Connection

from calib.errors import NotAStore, StoreDamaged
from calib.store.check_chain import ChainWalk, no_progress
from calib.store.check_schema import (
    file_findings,
    reference_findings,
    table_findings,
    trigger_findings,
    version_findings,
)
from calib.store.findings import StoreFinding, going_on
from calib.store.heads import KeptHead, head_findings
from calib.store.refusals import in_words
from calib.store.session import Store


@dataclass(frozen=True, slots=True)
class StoreCheck:
    """What a check found.

    Attributes
    ----------
    findings : tuple of StoreFinding
        Everything that is wrong, in the order it was met; empty for a sound store.
    entries, rows : int
        Entries of the record chain and rows that were checked.
    head_sequence, head_hash : int, str
        The last entry. Compare it with a head kept elsewhere, such as on a report:
        the chain alone does not show that all of it was written anew.
    """

    findings: tuple[StoreFinding, ...]
    entries: int
    rows: int
    head_sequence: int
    head_hash: str

    @property
    def sound(self) -> bool:
        """Whether nothing was found."""
        return not self.findings


def check_store(
    store: Store,
    progress: Callable[[int, int], None] = no_progress,
    heads: Sequence[KeptHead] = (),
) -> StoreCheck:
    """Check file, references, triggers, tables, versions, record chain and every row.

    Parameters
    ----------
    store : Store
        The store; it is read in one state and not changed.
    progress : callable, optional
        Called with the number of rows done and in all.
    heads : sequence of KeptHead, optional
        Heads kept elsewhere, to compare the chain with.

    Returns
    -------
    StoreCheck
        Findings, also for a file that is damaged.
    """
    walk = ChainWalk(progress)
    findings: list[StoreFinding] = []
    try:
        with in_words(store.path), store.engine.connect() as connection:
            findings.extend(_all_findings(connection, walk, heads))
    except (NotAStore, StoreDamaged) as error:
        findings.append(StoreFinding("unreadable", "file", str(error)))
    return StoreCheck(tuple(findings), walk.entries, walk.rows, walk.sequence, walk.hash)


def _all_findings(
    connection: Connection, walk: ChainWalk, heads: Sequence[KeptHead]
) -> Iterator[StoreFinding]:
    yield from going_on("the file", file_findings, connection)
    yield from going_on("references between rows", reference_findings, connection)
    yield from going_on("triggers", trigger_findings, connection)
    yield from going_on("tables and indices", table_findings, connection)
    yield from going_on("versions", version_findings, connection)
    yield from going_on("the record chain", walk.findings, connection)
    yield from going_on("heads kept elsewhere", partial(head_findings, kept=heads), connection)
