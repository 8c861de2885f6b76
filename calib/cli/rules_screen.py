"""Why a run has its verdict, on the screen: what rejects first, then warnings, then what was kept."""

from __future__ import annotations

from collections.abc import Iterable
from typing import TYPE_CHECKING

from calib.cli.run_screen import show_outlying, show_verdict_line
from calib.cli.screen import say
from calib.report.run_rows import excluded_readings, rule_rows

if TYPE_CHECKING:
    from calib.bench.control_history import ControlHistory
    from calib.bench.records import RunRecord
    from calib.report.run_rows import RuleRow


def show_rules(record: RunRecord) -> None:
    """Every rule of the verdict, grouped by its outcome."""
    show_verdict_line(record)
    if record.curve_run != record.heading.id:
        say(
            f"  unknowns read on the curve of run {record.curve_run}; these are the rules that curve was judged by"
        )
    rows = rule_rows(record)
    _group("Not kept; each of these rejects the curve", [r for r in rows if r.failed], "✗")
    _group("Not kept; a warning, which rejects nothing", [r for r in rows if r.warns], "!")
    kept = [r for r in rows if not (r.failed or r.warns)]
    _lines("Kept", [r for r in kept if not r.idle], "✓")
    _lines("Nothing to judge", [r for r in kept if r.idle], "–")
    show_outlying(record.evaluation)
    excluded = excluded_readings(record)
    if excluded:
        say("Left out of the fit", "bold")
        for line in excluded:
            say(f"  · {line}")
    if record.curves_before:
        say(f"  earlier curves of this run are kept: {record.curves_before}")


def show_control_history(history: ControlHistory) -> None:
    """What the multirule makes of the controls and checks, beside the verdict and no part of it."""
    if not history.baseline:
        return
    judged = [f"{material} ({runs} runs)" for material, runs in history.baseline.items() if runs]
    few = [material for material, runs in history.baseline.items() if not runs]
    say("Controls and checks over the runs (multirule; no part of the verdict)", "bold")
    for line in history.lines:
        say(f"  ! {line}")
    if judged and not history.lines:
        say("  ✓ no rule fired")
    if judged:
        say(f"  mean and standard deviation from the first runs of {', '.join(judged)}")
    if few:
        say(f"  too few runs to judge: {', '.join(few)}")


def _group(title: str, rows: Iterable[RuleRow], sign: str) -> None:
    rows = list(rows)
    if not rows:
        return
    say(title, "bold")
    for row in rows:
        say(f"  {sign} {row.what}")
        say(f"      seen     {row.detail}")
        say(f"      limit    {row.limit}, observed {row.observed}")
        say(f"      source   {row.source}")
        say(f"      to pass  {row.remedy or 'see what was seen'}")


def _lines(title: str, rows: Iterable[RuleRow], sign: str) -> None:
    rows = list(rows)
    if not rows:
        return
    say(title, "bold")
    for row in rows:
        say(f"  {sign} {row.what}: {row.detail}")
        say(f"      {row.source}")
