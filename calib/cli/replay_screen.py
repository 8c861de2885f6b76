"""How a replay looks on the screen: the summary first, then the runs that would change."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING

from calib.cli.screen import print_table, say
from calib.report.wording import in_brackets, number, percent, visible

if TYPE_CHECKING:
    from calib.bench.replay_records import Replay, ReplayedMethod, ReplayedRun, Span

IN_WORDS = {
    "concentration": "change",
    "interval": "change in the interval only",
    "appears": "appear",
    "disappears": "disappear",
}


def show_replay(record: Replay) -> None:
    """What would have changed, in one line and then run by run, method by method."""
    say(summary(record), "bold")
    for method in record.methods:
        changed = [run for run in record.changed if run.method == method.name]
        say(f"  {_evaluated(method)}: {len(changed) or 'none'} would change")
        if changed:
            _show_runs(changed)
    if record.changed:
        say("Only runs that would change are listed; nothing was written.")


def _show_runs(changed: Sequence[ReplayedRun]) -> None:
    unit = changed[0].unit
    print_table(
        (
            ">Run",
            "Day",
            "Instrument",
            "Verdict",
            in_brackets("Working range", unit),
            in_brackets("Calibrated range", unit),
            "Samples",
            ">Largest change",
            "First reason",
        ),
        [_row(run) for run in changed],
    )


def summary(record: Replay) -> str:
    """One line: how many runs and samples, and what would change in them."""
    void = f" ({record.void} void left out)" if record.void else ""
    if not record.changed:
        return f"{_count(record.runs, 'run')} replayed{void}: nothing would change"
    parts = [f"{_count(n, 'verdict')} {a} → {b}" for (a, b), n in record.verdict_changes.items()]
    parts += [
        _count(n, what) for what in ("working range", "calibrated range") if (n := record.runs_with(what))
    ]
    parts.append(f"samples: {_samples(record.sample_changes, record.samples)}")
    if record.largest_change is not None:
        run, change = record.largest_change
        parts.append(f"largest change {_signed(change)} in run {run}")
    return f"{_count(record.runs, 'run')} replayed{void}, {len(record.changed)} would change: " + "; ".join(
        parts
    )


def _evaluated(method: ReplayedMethod) -> str:
    under = f"version {method.version}" if method.file is None else visible(method.file)
    return f"{method.name}, {_count(method.runs, 'run')} under {under}"


def _row(run: ReplayedRun) -> tuple[str, ...]:
    before, after = run.before, run.after
    return (
        str(run.id),
        f"{run.at:%Y-%m-%d}",
        run.instrument,
        _arrow(before.decision, after.decision),
        _arrow(_range(before.working), _range(after.working)),
        _arrow(_range(before.calibrated), _range(after.calibrated)),
        _samples(run.sample_changes, run.sample_count),
        "" if run.largest_change is None else _signed(run.largest_change),
        run.first_reason or "",
    )


def _arrow(before: str, after: str) -> str:
    return before if before == after else f"{before} → {after}"


def _range(span: Span) -> str:
    if span.lowest is None or span.highest is None:
        return "none"
    return f"{number(span.lowest, 3)} to {number(span.highest, 3)}"


def _samples(changes: Mapping[str, int], of: int) -> str:
    if not changes:
        return f"none of {of}"
    parts = ", ".join(f"{changes[c]} {words}" for c, words in IN_WORDS.items() if c in changes)
    return f"{parts} of {of}"


def _count(n: int, what: str) -> str:
    return f"{n} {what}" if n == 1 else f"{n} {what}s"


def _signed(change: float) -> str:
    return f"{'+' if change >= 0 else ''}{percent(change, 2)}"
