"""Issue a report: it gets a number, names the one it replaces, and its fingerprint is kept."""

from __future__ import annotations

import hashlib
from collections.abc import Callable
from dataclasses import dataclass
from datetime import datetime

from sqlalchemy import func, select
from sqlalchemy.orm import Session

from calib import store as tables
from calib.bench.records import ReportStamp, RunRecord
from calib.bench.review_state import ReviewState
from calib.bench.show_run import local, show_run
from calib.errors import InputError, StoreError

# Writes the report of a run as bytes; a stamp of None means a draft.
Render = Callable[[RunRecord, ReportStamp | None], bytes]
TRIES = 5


@dataclass(frozen=True, slots=True)
class Issue:
    """What was written: the bytes, and the stamp on them (None: a draft, which is not recorded).

    ``copy`` says that the report was issued before and its bytes came out again.
    """

    content: bytes
    stamp: ReportStamp | None
    copy: bool = False


@dataclass(frozen=True, slots=True)
class IssuedRecord:
    """A report on record."""

    number: int
    run: int
    format: str
    fingerprint: str
    at: datetime
    by: str
    replaces: int | None
    reason: str | None
    chain_sequence: int
    chain_head: str
    in_force: bool


class _NumberTaken(StoreError):
    """Another report took the number while this one was written."""


def issue_report(
    store: tables.Store,
    number: int,
    kind: str,
    render: Render,
    *,
    by: str,
    reason: str | None = None,
) -> Issue:
    """Write the report of a run: issued where the run is approved, else a draft.

    A report that was issued before and would not change is not issued again: the same
    bytes are handed out. One that replaces another needs a reason, and names the other.

    Parameters
    ----------
    kind : str
        'html', 'json' or 'csv'.
    render : callable
        Makes the bytes from the record and its stamp.

    Raises
    ------
    InputError
        When it would replace a report and no reason is given.
    """
    for _ in range(TRIES):
        record = show_run(store, number)
        if not record.review.approved or record.heading.void_reason is not None:
            return Issue(render(record, None), None)
        with store.reading() as session:
            before = _latest(session, number, kind)
            coming = (session.scalar(select(func.max(tables.IssuedReport.id))) or 0) + 1
        if before is not None and (copy := _copy(record, before, render)) is not None:
            return copy
        if before is not None and not (reason or "").strip():
            raise InputError(
                f"run {number} changed since report {before.id} was issued; "
                "a report that replaces it needs --reason"
            )
        stamp = ReportStamp(
            number=coming,
            at=store.now(),
            by=by,
            replaces=before.id if before else None,
            reason=reason if before else None,
            chain_sequence=record.chain_sequence,
            chain_head=record.chain_head,
        )
        content = render(record, stamp)
        try:
            _write(store, record.review, number, kind, stamp, content)
        except _NumberTaken:
            continue
        return Issue(content, stamp)
    raise StoreError("other reports were issued at the same time again and again; try once more")


def issued_reports(store: tables.Store, number: int | None = None) -> tuple[IssuedRecord, ...]:
    """Reports on record, in the order of their numbers; of one run where ``number`` is given."""
    query = select(tables.IssuedReport).order_by(tables.IssuedReport.id)
    if number is not None:
        query = query.where(tables.IssuedReport.run_id == number)
    with store.reading() as session:
        rows = session.scalars(query).all()
    replaced = {row.supersedes for row in rows}
    return tuple(
        IssuedRecord(
            row.id,
            row.run_id,
            row.format,
            row.fingerprint,
            local(row.at, row.offset_minutes),
            row.by,
            row.supersedes,
            row.reason,
            row.chain_sequence,
            row.chain_head,
            row.id not in replaced,
        )
        for row in rows
    )


def _latest(session: Session, number: int, kind: str) -> tables.IssuedReport | None:
    row = tables.IssuedReport
    return session.scalar(select(row).where(row.run_id == number, row.format == kind, tables.is_current(row)))


def _copy(record: RunRecord, before: tables.IssuedReport, render: Render) -> Issue | None:
    """The report as it was issued, where the same bytes come out again."""
    stamp = ReportStamp(
        number=before.id,
        at=local(before.at, before.offset_minutes),
        by=before.by,
        replaces=before.supersedes,
        reason=before.reason,
        chain_sequence=before.chain_sequence,
        chain_head=before.chain_head,
    )
    content = render(record, stamp)
    same = hashlib.sha256(content).hexdigest() == before.fingerprint
    return Issue(content, stamp, copy=True) if same else None


def _write(
    store: tables.Store, review: ReviewState, number: int, kind: str, stamp: ReportStamp, content: bytes
) -> None:
    with store.change(action="issue report", by=stamp.by, reason=stamp.reason) as session:
        last = session.scalar(select(func.max(tables.IssuedReport.id))) or 0
        if last + 1 != stamp.number:
            raise _NumberTaken("taken")
        offset = stamp.at.utcoffset()
        session.add(
            tables.IssuedReport(
                run_id=number,
                review_id=review.review_id,
                format=kind,
                fingerprint=hashlib.sha256(content).hexdigest(),
                size=len(content),
                chain_sequence=stamp.chain_sequence,
                chain_head=stamp.chain_head,
                supersedes=stamp.replaces,
                reason=stamp.reason,
                by=stamp.by,
                at=stamp.at,
                offset_minutes=round(offset.total_seconds() / 60) if offset else 0,
            )
        )
