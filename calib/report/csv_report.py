"""The quantities of a run as CSV: one row each, full precision, safe to open in a spreadsheet."""

from __future__ import annotations

import csv
from io import StringIO
from typing import TYPE_CHECKING, Any

from calib.report.review_wording import status_line

if TYPE_CHECKING:
    from calib.bench.records import QuantityRecord, ReportStamp, RunRecord

HEADINGS = (
    "status",
    "report",
    "run",
    "instrument",
    "method",
    "method version",
    "measured at",
    "operator",
    "verdict",
    "sample",
    "role",
    "replicates",
    "dilution",
    "concentration",
    "unit",
    "u",
    "k",
    "U",
    "lower",
    "upper",
    "confidence",
    "kind",
    "position",
    "flags",
    "curve",
    "chain sequence",
    "chain head",
)
# A spreadsheet takes a cell that starts so for a formula (OWASP, 'CSV Injection').
FORMULA_STARTS = ("=", "+", "-", "@", "\t", "\r", "\n", "＝", "＋", "－", "＠")


def render_csv(record: RunRecord, stamp: ReportStamp | None = None) -> str:
    """Lay out the quantities of a run: UTF-8 text, ISO 8601 times, point decimals.

    A void run, a rejected curve and a value outside the calibrated range give no number.
    """
    out = StringIO(newline="")
    writer = csv.writer(out, lineterminator="\r\n")
    writer.writerow(HEADINGS)
    for quantity in record.evaluation.quantities:
        writer.writerow(neutral(value) for value in _row(record, stamp, quantity))
    return out.getvalue()


def neutral(value: Any) -> Any:
    """A cell that no spreadsheet takes for a formula: a text that looks like one gets an apostrophe.

    Examples
    --------
    >>> neutral("=1+1"), neutral("-3"), neutral(-3.0), neutral("L-17")
    ("'=1+1", "'-3", -3.0, 'L-17')
    """
    if isinstance(value, str) and value.lstrip().startswith(FORMULA_STARTS):
        return f"'{value}"
    return value


def _row(record: RunRecord, stamp: ReportStamp | None, q: QuantityRecord) -> tuple[Any, ...]:
    heading = record.heading
    void = heading.void_reason is not None
    given = q.concentration is not None and not void
    return (
        f"VOID: {heading.void_reason}" if void else status_line(record.review, stamp),
        stamp.number if stamp else "",
        heading.id,
        heading.instrument,
        heading.method,
        heading.method_version,
        heading.at.isoformat(),
        heading.operator,
        record.evaluation.verdict.decision,
        q.sample,
        q.role,
        q.replicates,
        q.dilution,
        *((q.concentration, q.unit, q.u, q.k, q.expanded, q.lower, q.upper) if given else _no_value(q.unit)),
        q.confidence,
        q.kind,
        q.position or "",
        ";".join(q.flags),
        q.curve_id,
        stamp.chain_sequence if stamp else record.chain_sequence,
        stamp.chain_head if stamp else record.chain_head,
    )


def _no_value(unit: str) -> tuple[Any, ...]:
    return ("", unit, "", "", "", "", "")
