"""How the budget of one sample looks on the screen, with the ends of the curve and a cross-check."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

from calib.bench.cross_check import ends_of
from calib.cli.screen import print_table, say
from calib.report.budget_rows import HEADINGS, left_out_in_words, line_rows
from calib.report.wording import number, result_text, with_unit

if TYPE_CHECKING:
    from calib.bench.cross_check import CrossCheck
    from calib.bench.records import QuantityRecord, RunRecord

ENDS = ("concentration 0", "large concentrations")


def show_sample_budgets(record: RunRecord, sample: str, drawn: Sequence[CrossCheck]) -> None:
    """Uncertainty budget of a sample, one table for each dilution; then what is not in it."""
    evaluation, verdict = record.evaluation, record.evaluation.verdict
    for q in evaluation.quantities:
        if q.sample != sample:
            continue
        dilution = f" × {number(q.dilution)}" if q.dilution != 1 else ""
        say(f"{q.sample}{dilution}: {result_text(q, verdict.lowest, verdict.highest)}, {q.kind}", "bold")
        if q.k is not None:
            say(f"  k = {q.k:.2f} for {100 * q.confidence:.4g} %; U = k·u")
        rows = line_rows(q, evaluation)
        if rows:
            print_table(HEADINGS, rows)
        else:
            say("  no standard uncertainty is given, so there is no budget")
        for sentence in _ends(record, q):
            say(f"  {sentence}")
        for check in drawn:
            if check.dilution == q.dilution:
                say(f"  {_drawn(check)}")
    for sentence in left_out_in_words(evaluation):
        say(f"  {sentence}")


def _ends(record: RunRecord, q: QuantityRecord) -> list[str]:
    """Index of each end of the curve, for what is read near it."""
    found = zip(ENDS, ends_of(record, q), strict=True)
    return [
        f"index of the curve's end at {where}: {number(h, 2)} (half width of the band there over the distance to it)"
        for where, h in found
        if h is not None
    ]


def _drawn(check: CrossCheck) -> str:
    """The interval by Monte Carlo in words."""
    lower = "no lower limit" if not check.lower else f"from {number(check.lower, 4)}"
    upper = "no upper limit" if check.upper is None else f"to {with_unit(number(check.upper, 4), check.unit)}"
    interval = "response outside the curve" if check.state == "off-curve" else f"{lower} {upper}"
    return f"by propagating distributions: {interval} (seed {check.seed}, {check.trials} draws)"
