"""How a drift review looks on the screen."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import TYPE_CHECKING

from calib.cli.screen import print_table, say
from calib.report.wording import number

if TYPE_CHECKING:
    from calib.bench.review_drift import DriftRecord


def show_reviews(records: Sequence[DriftRecord]) -> None:
    """One line for each instrument and method."""
    print_table(
        (
            "Instrument",
            "Method",
            ">Runs",
            ">Shift now: low",
            ">middle",
            ">high",
            ">Check recovery",
            "Signals",
        ),
        [
            (
                r.instrument,
                r.method,
                str(len(r.runs)),
                *(_percent(v) for v in r.shift_percent[-1]),
                _plain_percent(r.recovery_percent[-1]),
                _signal_summary(r),
            )
            for r in records
        ],
    )
    say("shift: what a fixed sample would read on the baseline curve, against its concentration")


def show_review(record: DriftRecord, last: int) -> None:
    """The latest runs with shift, recovery, signals and the events between them."""
    unit = record.concentration_unit
    references = [f"{number(r)} {unit}" for r in record.references]
    say(f"{record.instrument} · {record.method} · {len(record.runs)} runs", "bold")
    say(f"  {limits_in_words(record)}")
    rows = []
    for i in range(max(0, len(record.runs) - last), len(record.runs)):
        run = record.runs[i]
        rows.append(
            (
                str(run.id),
                f"{run.at:%Y-%m-%d}",
                *(_percent(v) for v in record.shift_percent[i]),
                _plain_percent(record.recovery_percent[i]),
                run.decision if run.decision != "accepted" else "",
                "; ".join(run.signals),
            )
        )
    print_table(
        (">Run", "Day", *(f">Shift at {r}" for r in references), ">Check recovery", "Verdict", "Signal"), rows
    )
    show_first_signals(record)
    for event in record.events:
        say(f"  {event.at:%Y-%m-%d}  {event.kind}: {event.what} ({event.by})")


def show_first_signals(record: DriftRecord) -> None:
    """Where each excursion begins, and the event before it."""
    for i in record.review.first_signals:
        run = record.runs[i]
        before = [e for e in record.events if e.at <= run.at]
        cause = f"; last event before it: {before[-1].at:%Y-%m-%d} {before[-1].what}" if before else ""
        say(f"  ▲ signal from run {run.id} ({run.at:%Y-%m-%d}): {', '.join(run.signals)}{cause}")


def limits_in_words(record: DriftRecord) -> str:
    """What the limits rest on."""
    count = record.baseline_runs
    if count < 10:
        return f"no limits yet: {count} accepted runs, 10 are needed"
    kind = "provisional limits" if record.review.provisional else "limits"
    return f"{kind} from the first {count} accepted runs since {record.runs[record.restart].at:%Y-%m-%d}"


def _signal_summary(record: DriftRecord) -> str:
    runs = [r for r in record.runs if r.signals]
    if not runs:
        return "none" if record.baseline_runs >= 10 else "no limits yet"
    latest = record.runs[-1]
    now = f"; now: {', '.join(latest.signals)}" if latest.signals else "; none now"
    return f"first {runs[0].at:%Y-%m-%d}{now}"


def _percent(value: float) -> str:
    return f"{value:+.1f} %" if math.isfinite(value) else "–"


def _plain_percent(value: float) -> str:
    return f"{value:.1f} %" if math.isfinite(value) else "–"
