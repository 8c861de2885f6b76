"""The lists a quality manager wants before an audit, each a table of facts."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from datetime import datetime

from sqlalchemy import func, select
from sqlalchemy.orm import Session

from calib import store as tables
from calib.bench.actions import ActionRecord, list_actions
from calib.bench.check_records import Progress, RecordCheck, check_records
from calib.bench.exceptions import RunException, exceptions_of_runs
from calib.bench.issue_report import issued_reports
from calib.bench.keeping import versions
from calib.bench.review_drift import review_instrument, reviewed_pairs
from calib.bench.review_state import APPROVED, CHANGED, ReviewState, review_states
from calib.bench.show_run import RunLine, list_runs
from calib.bench.verify_installation import VerificationRecord, list_verifications
from calib.errors import CalibError

Cell = str | int | float | None


@dataclass(frozen=True, slots=True)
class AuditList:
    """One list: what it is, its headings, and its rows; ``calm`` lists are no cause for action."""

    key: str
    title: str
    headings: tuple[str, ...]
    rows: tuple[tuple[Cell, ...], ...]
    calm: bool = False


@dataclass(frozen=True, slots=True)
class Audit:
    """All lists over the runs of a period, with the state of the store they were read from."""

    since: datetime | None
    until: datetime | None
    at: datetime
    runs: int
    lists: tuple[AuditList, ...]
    check: RecordCheck


@dataclass(frozen=True, slots=True)
class _Period:
    """What the lists are made from: the runs of the period, their review and exceptions."""

    runs: Mapping[int, RunLine]
    states: Mapping[int, ReviewState]
    exceptions: Mapping[int, tuple[RunException, ...]]
    actions: tuple[ActionRecord, ...]

    def lines(self, kind: str) -> Iterator[tuple[RunLine, RunException]]:
        for number, run in self.runs.items():
            for exception in self.exceptions.get(number, ()):
                if exception.kind == kind:
                    yield run, exception


def audit(
    store: tables.Store,
    *,
    since: datetime | None = None,
    until: datetime | None = None,
    progress: Progress = lambda done, total: None,
) -> Audit:
    """Make every list over the runs measured from ``since`` up to ``until``; all by default.

    A time without an offset is the instrument's own.
    """
    check = check_records(store, progress=progress)
    runs = {r.id: r for r in list_runs(store) if _within(r.at, since, until)}
    with store.reading() as session:
        period = _Period(
            runs,
            review_states(session),
            exceptions_of_runs(session),
            list_actions(store),
        )
        rates = _exclusion_rates(session, runs)
        own_work = _own_work(session, runs)
    lists = (
        _without_review(period),
        _expired_lots(period),
        AuditList(
            "overrides",
            "Decisions against a rule",
            ("run", "what"),
            (*((run.id, e.what) for run, e in period.lines("override")), *own_work),
        ),
        _rejected(period),
        _causes(period),
        AuditList(
            "exclusion-rate",
            "Standard readings excluded, by who measured and by instrument",
            ("measured by", "instrument", "readings", "excluded", "percent"),
            rates,
            calm=True,
        ),
        _signals(store, period),
        _late(period),
        _reports(store, period),
        _open_actions(period),
        _verifications(list_verifications(store)),
        AuditList(
            "chain",
            "Check of the store: chain, rows, originals, curves fitted again",
            ("where", "kind", "what"),
            tuple((f.place, f.code, f.message) for f in check.findings),
        ),
    )
    return Audit(since, until, store.now(), len(runs), lists, check)


def _within(at: datetime, since: datetime | None, until: datetime | None) -> bool:
    begins = since is None or at >= (since if since.tzinfo else since.replace(tzinfo=at.tzinfo))
    return begins and (until is None or at <= (until if until.tzinfo else until.replace(tzinfo=at.tzinfo)))


def _named(run: RunLine) -> tuple[Cell, ...]:
    return run.id, f"{run.at:%Y-%m-%d %H:%M}", run.instrument, run.method, run.operator


RUN = ("run", "measured", "instrument", "method", "measured by")


def _without_review(period: _Period) -> AuditList:
    rows = tuple(
        (*_named(run), period.states[number].state)
        for number, run in period.runs.items()
        if not run.void and period.states[number].state != APPROVED
    )
    return AuditList("without-review", "Runs without an approval in force", (*RUN, "state"), rows)


def _expired_lots(period: _Period) -> AuditList:
    rows = tuple((*_named(run), e.what) for run, e in period.lines("expired lot"))
    return AuditList("expired-lots", "Expired lots used", (*RUN, "what"), rows)


def _own_work(session: Session, runs: Mapping[int, RunLine]) -> tuple[tuple[Cell, ...], ...]:
    query = select(tables.Review).where(tables.Review.own_work, tables.Review.decision == APPROVED)
    return tuple(
        (r.run_id, f"own work approved by {r.by}, {r.at:%Y-%m-%d %H:%M} UTC: {r.comment or 'no comment'}")
        for r in session.scalars(query.order_by(tables.Review.id))
        if r.run_id in runs
    )


def _rejected(period: _Period) -> AuditList:
    rows = tuple(
        (
            *_named(run),
            "; ".join(e.what for e in period.exceptions[run.id] if e.kind in ("failed check", "failed rule")),
        )
        for run, _ in period.lines("rejected")
    )
    return AuditList("rejected", "Rejected curves and why", (*RUN, "causes"), rows, calm=True)


def _causes(period: _Period) -> AuditList:
    counted: Counter[tuple[str, str]] = Counter()
    for kind in ("failed check", "failed rule"):
        for run, exception in period.lines(kind):
            counted[(run.instrument, exception.what.partition(":")[0])] += 1
    rows = tuple((what, instrument, n) for (instrument, what), n in counted.most_common())
    return AuditList(
        "causes", "Causes of rejection, counted", ("rule", "instrument", "runs"), rows, calm=True
    )


def _exclusion_rates(session: Session, runs: Mapping[int, RunLine]) -> tuple[tuple[Cell, ...], ...]:
    standard, curve = tables.CurveStandard, tables.Curve
    query = (
        select(curve.run_id, func.count(), func.sum(standard.excluded))
        .join(standard, standard.curve_id == curve.id)
        .where(tables.is_current(curve))
        .group_by(curve.run_id)
    )
    all_of: Counter[tuple[str, str]] = Counter()
    excluded: Counter[tuple[str, str]] = Counter()
    for number, count, out in session.execute(query):
        if number in runs:
            key = (runs[number].operator, runs[number].instrument)
            all_of[key] += count
            excluded[key] += int(out or 0)
    return tuple(
        (*key, n, excluded[key], round(100 * excluded[key] / n, 2)) for key, n in sorted(all_of.items())
    )


def _signals(store: tables.Store, period: _Period) -> AuditList:
    rows: list[tuple[Cell, ...]] = []
    for instrument, method in reviewed_pairs(store):
        try:
            record = review_instrument(store, instrument, method)
        except CalibError as cause:
            rows.append((instrument, method, "", "", f"cannot be reviewed: {cause}"))
            continue
        for series in record.review.series:
            for index in series.first_signals:
                run = record.runs[index]
                if run.id in period.runs and not _answered(period.actions, instrument, run.id, run.at):
                    what = f"{series.family} {series.name}"
                    rows.append((instrument, method, run.id, f"{run.at:%Y-%m-%d %H:%M}", what))
    return AuditList(
        "signals",
        "Drift signals without an action",
        ("instrument", "method", "run", "measured", "signal"),
        tuple(rows),
    )


def _answered(actions: Sequence[ActionRecord], instrument: str, run: int, at: datetime) -> bool:
    """Whether an action is about the run, or about its instrument over a window that holds it."""
    return any(
        (a.kind == "run" and a.name == str(run))
        or (a.kind == "instrument" and a.name == instrument and _within(at, a.since, a.until) and a.at >= at)
        for a in actions
    )


def _late(period: _Period) -> AuditList:
    rows = tuple((*_named(run), e.what) for run, e in period.lines("late entry"))
    clock = tuple((*_named(run), e.what) for run, e in period.lines("clock set back"))
    return AuditList("late-entries", "Late entries, and clocks set back", (*RUN, "what"), (*rows, *clock))


def _reports(store: tables.Store, period: _Period) -> AuditList:
    rows = []
    for report in issued_reports(store):
        run = period.runs.get(report.run)
        if run is None or not report.in_force:
            continue
        state = "void" if run.void else period.states[report.run].state
        if state != APPROVED:
            words = "changed since" if state == CHANGED else state
            rows.append((report.number, report.run, f"{report.at:%Y-%m-%d %H:%M}", report.by, words))
    return AuditList(
        "outdated-reports",
        "Issued reports whose run changed since",
        ("report", "run", "issued", "by", "run is"),
        tuple(rows),
    )


def _open_actions(period: _Period) -> AuditList:
    rows = tuple(
        (a.number, f"{a.at:%Y-%m-%d}", a.by, f"{a.kind} {a.name}", a.what, a.results)
        for a in period.actions
        if a.open
    )
    return AuditList(
        "open-actions",
        "Corrective actions still open",
        ("action", "opened (UTC)", "by", "about", "what", "results"),
        rows,
    )


def _verifications(records: Sequence[VerificationRecord]) -> AuditList:
    """What the verification of this installation lacks: none, failed, or of other versions."""
    rows: list[tuple[Cell, ...]] = []
    here = versions()
    same = [r for r in records if all(r.versions.get(k) == v for k, v in here.items())]
    if not same:
        told = ", ".join(f"{name} {version}" for name, version in here.items())
        rows.append(("", f"none of these versions: {told}; run calib verify"))
    rows.extend(
        (f"{r.at:%Y-%m-%d %H:%M}", f"{sum(not v.agrees for v in r.values)} of {len(r.values)} figures differ")
        for r in same
        if not r.passed
    )
    return AuditList(
        "verification", "Verification of this installation", ("when", "what is missing"), tuple(rows)
    )
