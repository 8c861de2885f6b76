"""A store opened for use from Python: the same verbs as the command line."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import datetime
from pathlib import Path
from types import TracebackType
from typing import Self

from calib import store as tables
from calib.bench.amend_run import Change, amend_run
from calib.bench.check_records import RecordCheck, check_records
from calib.bench.correct_run import exclude_readings, refit_run, restore_readings, void_run
from calib.bench.log_run import evaluate_plan, log_plan
from calib.bench.plan_run import LogOptions, plan_file
from calib.bench.quantify import quantify_plan
from calib.bench.record_history import HistoryStep, history_of_record
from calib.bench.records import RunRecord
from calib.bench.replay import ReplayRequest, replay_runs
from calib.bench.replay_records import Replay
from calib.bench.review_drift import DriftRecord, review_instrument
from calib.bench.review_runs import ReviewLine, approve_run, return_run, runs_to_review
from calib.bench.show_run import RunLine, list_runs, show_run


@dataclass(frozen=True, slots=True)
class Laboratory:
    """The use cases over one store.

    ``by`` is recorded as the person who acts; it does not prove an identity.
    Registering instruments, methods, lots and events: see `calib.bench.register`.
    """

    store: tables.Store
    by: str

    def log(
        self,
        path: str | Path,
        *,
        instrument: str | None = None,
        methods: Sequence[str] = (),
        at: datetime | None = None,
        lot: str | None = None,
        layout: str | None = None,
        exclusions: Sequence[tuple[str, str]] = (),
        lot_override: str | None = None,
    ) -> tuple[RunRecord, ...]:
        """Log a file of standards: fit, judge, quantify.

        ``exclusions`` are (reading, cause) known before the fit; ``lot_override`` is the reason to use an
        expired or unknown lot.
        """
        options = LogOptions(
            self.by, instrument, tuple(methods), at, lot, layout, tuple(exclusions), lot_override
        )
        return log_plan(self.store, evaluate_plan(plan_file(self.store, path, options)))

    def quantify(
        self,
        path: str | Path,
        *,
        instrument: str | None = None,
        methods: Sequence[str] = (),
        at: datetime | None = None,
        lot: str | None = None,
        layout: str | None = None,
    ) -> tuple[RunRecord, ...]:
        """Read a file of unknowns on the curve in force."""
        options = LogOptions(self.by, instrument, tuple(methods), at, lot, layout)
        return quantify_plan(self.store, plan_file(self.store, path, options))

    def runs(
        self, *, instrument: str | None = None, method: str | None = None, last: int | None = None
    ) -> tuple[RunLine, ...]:
        """Runs in the order they were measured."""
        return list_runs(self.store, instrument=instrument, method=method, last=last)

    def run(self, number: int) -> RunRecord:
        """One run as it stands now."""
        return show_run(self.store, number)

    def exclude(
        self, number: int, readings: Sequence[str], *, reason: str, reason_class: str = "other"
    ) -> RunRecord:
        """Leave standard readings out of the fit, with a reason."""
        return exclude_readings(
            self.store, number, readings, reason=reason, reason_class=reason_class, by=self.by
        )

    def restore(self, number: int, readings: Sequence[str], *, reason: str) -> RunRecord:
        """Take excluded readings back, with a reason."""
        return restore_readings(self.store, number, readings, reason=reason, by=self.by)

    def refit(self, number: int, *, reason: str) -> RunRecord:
        """Fit and judge a run again."""
        return refit_run(self.store, number, reason=reason, by=self.by)

    def amend(self, number: int, change: Change, *, reason: str) -> RunRecord:
        """Correct facts of a run."""
        return amend_run(self.store, number, change, reason=reason, by=self.by)

    def void(self, number: int, *, reason: str) -> RunRecord:
        """Declare that a run counts no longer."""
        return void_run(self.store, number, reason=reason, by=self.by)

    def approve(self, number: int, *, comment: str | None = None) -> RunRecord:
        """Approve a run as it stands: its results may be reported."""
        return approve_run(self.store, number, by=self.by, comment=comment)

    def return_run(self, number: int, *, reason: str) -> RunRecord:
        """Return a run to its analyst, with the reason."""
        return return_run(self.store, number, by=self.by, reason=reason)

    def to_review(self) -> tuple[ReviewLine, ...]:
        """Runs that wait for review, those with most exceptions first."""
        return runs_to_review(self.store)

    def history(self, kind: str, record: str) -> tuple[HistoryStep, ...]:
        """Everything that happened to one record."""
        return history_of_record(self.store, kind, record)

    def drift(
        self, instrument: str, method: str | None = None, *, since: datetime | None = None
    ) -> DriftRecord:
        """Review one instrument and method over time."""
        return review_instrument(self.store, instrument, method, since=since)

    def replay(self, request: ReplayRequest) -> Replay:
        """Evaluate past runs under another method version; nothing is written."""
        return replay_runs(self.store, request)

    def check(self, *, all_curves: bool = False) -> RecordCheck:
        """Check chain, integrity and stored curves."""
        return check_records(self.store, all_curves=all_curves)

    def close(self) -> None:
        """Let go of the store."""
        self.store.close()

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.close()


def open_store(url: str | Path, *, by: str | None = None) -> Laboratory:
    """Open a store, or create it where there is none, for the verbs of the command line.

    Parameters
    ----------
    url : str or Path
        A path, or ``sqlite:///path``.
    by : str, optional
        Who acts; the login name where left out.

    Raises
    ------
    StoreError
        When it is no store, of another version, or locked.
    """
    import getpass

    return Laboratory(tables.open_store(url), by or getpass.getuser())
