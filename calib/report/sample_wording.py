"""Results of a sample in words; what is not released carries DRAFT."""

from __future__ import annotations

from typing import TYPE_CHECKING

from calib.report.wording import MISSING, NO_RESULT, number, percent, result_text, with_unit

if TYPE_CHECKING:
    from calib.bench.sample_desk import SampleRecord, SampleResult


def sample_result_text(result: SampleResult) -> str:
    """One result, with DRAFT where its run is not approved; a void run has none."""
    if result.void:
        return NO_RESULT
    text = result_text(result.quantity, result.lowest_reported, result.verdict.highest)
    return text if text == NO_RESULT or result.approved else f"DRAFT {text}"


def counting_text(record: SampleRecord) -> str:
    """The result that counts: its own text, or the mean of several dilutions."""
    if not record.counts:
        return MISSING
    if len(record.counts) == 1:
        return sample_result_text(record.counts[0])
    mean = with_unit(number(record.dilutions.value), record.unit)
    text = f"{mean}, mean of {len(record.counts)} dilutions"
    return text if all(r.approved for r in record.counts) else f"DRAFT {text}"


def statement_text(record: SampleRecord) -> tuple[str, ...]:
    """What is said about dilutions and the specification."""
    lines = []
    outcome = record.dilutions
    if outcome.agree is not None:
        verb = "agree" if outcome.agree else "disagree"
        lines.append(f"dilutions {verb}: spread {percent(outcome.spread)}")
    if outcome.hook:
        lines.append("the value rises with the dilution: the response may have turned back (hook)")
    for result in record.counts:
        if result.statement is not None:
            draft = "" if result.approved else "DRAFT "
            lines.append(f"{draft}{result.statement.outcome} ({result.statement.rule})")
    return tuple(dict.fromkeys(lines))
