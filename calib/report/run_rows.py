"""The tables of a run as rows of words, for whatever lays them out."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from calib.acceptance.limits import within
from calib.acceptance.wording import signed_percent
from calib.bench.flags import in_words
from calib.bench.statements import statement_of
from calib.report.standard_limits import relative_error_limit
from calib.report.wording import (
    LEVEL_DIGITS,
    MISSING,
    NO_RESULT,
    expanded_text,
    interval_text,
    number,
    percent,
    quantity_text,
    significant,
    with_unit,
)

if TYPE_CHECKING:
    from calib.acceptance import CriterionResult
    from calib.bench.records import BlankRecord, QuantityRecord, RunRecord, StandardRecord

CHECK_LIMITS = {
    "check": "check_recovery",
    "first-check": "first_check_recovery",
    "control": "control_recovery",
}
SHARES = (
    "standards_passing",
    "controls_passing",
    "controls_passing_each_level",
    "minimum_control_share",
    "top_slope",
    "top_of_range",
)
DEVIATIONS = (
    "relative_error",
    "relative_error_lowest",
    "relative_error_highest",
    "relative_standard_error",
    "check_recovery",
    "opening_check_recovery",
    "first_check_recovery",
    "control_recovery",
    "response_factor_rsd",
    "carry_over",
    "blank_share",
)
# Of a value outside the calibrated range nothing but the limit is printed, so nothing about its interval.
ABOUT_THE_INTERVAL = ("lopsided", "one-sided", "no-value")


LONGEST_DETAIL = 160


@dataclass(frozen=True, slots=True)
class StandardRow:
    """One standard; ``marked`` where it is excluded, absent, saturated or beyond its limit."""

    label: str
    position: str
    level: str
    response: str
    back_calculated: str
    relative_error: str
    limit: str
    status: str
    marked: bool


@dataclass(frozen=True, slots=True)
class RuleRow:
    """One acceptance criterion; ``failed`` where it rejects the curve, ``warns`` where it is only not kept.

    ``idle`` where the run had nothing to judge by it; ``remedy`` says what would have to be different.
    """

    what: str
    detail: str
    limit: str
    observed: str
    verdict: str
    source: str
    failed: bool
    warns: bool
    idle: bool
    remedy: str


@dataclass(frozen=True, slots=True)
class BlankRow:
    """One blank."""

    label: str
    role: str
    position: str
    response: str
    back_calculated: str


@dataclass(frozen=True, slots=True)
class CheckRow:
    """One check standard, first check or control sample."""

    label: str
    role: str
    nominal: str
    found: str
    recovery: str
    limit: str
    remarks: str


@dataclass(frozen=True, slots=True)
class UnknownRow:
    """One unknown at one dilution; ``marked`` where it has no value or a flag."""

    sample: str
    n: str
    mean_response: str
    dilution: str
    result: str
    expanded: str
    k: str
    interval: str
    kind: str
    remarks: str
    marked: bool


def standard_rows(record: RunRecord) -> tuple[StandardRow, ...]:
    """Standards by level, in the order of the file within one."""
    ordered = sorted(record.evaluation.standards, key=lambda s: s.concentration)
    return tuple(_standard(record, s) for s in ordered)


def _standard(record: RunRecord, s: StandardRecord) -> StandardRow:
    limit = relative_error_limit(record, s.concentration) if s.role == "standard" else None
    error = MISSING
    if s.relative_error is not None:
        error = percent_signed(s.relative_error, limit)
    status = _status(s, limit)
    return StandardRow(
        label=s.label,
        position=s.position or "",
        level=number(s.concentration, LEVEL_DIGITS),
        response=s.absent_cause or significant(s.response),
        back_calculated=significant(s.back_calculated),
        relative_error=error,
        limit=MISSING if limit is None else f"± {number(100 * limit)} %",
        status="; ".join(status),
        marked=bool(status) and status != ["anchor, not judged"],
    )


def percent_signed(fraction: float, limit: float | None) -> str:
    """Relative error in percent with its sign, never rounded onto a limit it is beyond."""
    return signed_percent(fraction, float("inf") if limit is None else limit)


def _status(s: StandardRecord, limit: float | None) -> list[str]:
    words = []
    if s.excluded:
        words.append(f"excluded: {s.reason}" if s.reason else "excluded")
    if s.absent_cause:
        words.append(f"absent ({s.absent_cause})")
    if s.saturated:
        words.append("saturated")
    if s.role == "anchor":
        words.append("anchor, not judged")
    if limit is not None and s.response is not None and not s.excluded:
        if s.relative_error is None:
            words.append("no back-calculated value")
        elif not within(s.relative_error, limit):
            words.append("beyond the limit")
    return words


def rule_rows(record: RunRecord) -> tuple[RuleRow, ...]:
    """Acceptance criteria, failed ones first."""
    ordered = sorted(record.evaluation.verdict.criteria, key=lambda c: c.passed)
    return tuple(_rule(c, record.definition.concentration_unit) for c in ordered)


def _rule(c: CriterionResult, unit: str) -> RuleRow:
    return RuleRow(
        what=c.what,
        detail=c.detail,
        limit=_criterion_figure(c, c.limit, unit),
        observed=_criterion_figure(c, c.observed, unit),
        verdict="kept" if c.passed else "warning" if c.warns else "NOT KEPT",
        source=c.source,
        failed=c.rejects,
        warns=not c.passed and c.warns,
        idle=c.passed and c.limit is not None and c.observed is None,
        remedy=c.remedy,
    )


def _criterion_figure(c: CriterionResult, value: float | None, unit: str) -> str:
    if value is None:
        return MISSING
    if c.id in DEVIATIONS and c.limit is not None:
        return (
            f"{number(100 * value)} %"
            if value == c.limit
            else signed_percent(value, c.limit).removeprefix("+")
        )
    if c.id in SHARES:
        return f"{number(100 * value, 3)} %"
    return with_unit(number(value), unit) if c.id == "blank" else number(value)


def reasons(record: RunRecord) -> tuple[str, ...]:
    """What rejects the curve, each in one sentence; a long list of readings is left to the rules."""
    return tuple(_sentence(row) for row in rule_rows(record) if row.failed)


def warnings(record: RunRecord) -> tuple[str, ...]:
    """What is not kept and only warns, each in one sentence."""
    return tuple(_sentence(row) for row in rule_rows(record) if row.warns)


def _sentence(row: RuleRow) -> str:
    return f"{row.what}: {row.detail if len(row.detail) <= LONGEST_DETAIL else _in_short(row)}"


def _in_short(row: RuleRow) -> str:
    seen = f"observed {row.observed}, " if row.observed != MISSING else ""
    return f"{seen}every reading named under Rules"


def blank_rows(record: RunRecord) -> tuple[BlankRow, ...]:
    """Blanks, zero standards and carry-over blanks of the run."""
    return tuple(_blank(b) for b in record.evaluation.blanks)


def _blank(b: BlankRecord) -> BlankRow:
    return BlankRow(
        b.label,
        b.role,
        b.position or "",
        b.absent_cause or significant(b.response),
        number(b.back_calculated, 3),
    )


def check_rows(record: RunRecord) -> tuple[CheckRow, ...]:
    """Check standards, first checks and control samples."""
    found = record.evaluation.quantities
    return tuple(_check(record, q) for q in found if q.role in CHECK_LIMITS)


def _check(record: RunRecord, q: QuantityRecord) -> CheckRow:
    verdict, limit = record.evaluation.verdict, record.definition.limits.get(CHECK_LIMITS.get(q.role, ""))
    value = q.concentration
    return CheckRow(
        label=q.sample,
        role=q.role,
        nominal=number(q.nominal, LEVEL_DIGITS),
        found=quantity_text(q, verdict.lowest, verdict.highest),
        recovery=percent(value / q.nominal if value is not None and q.nominal else None),
        limit=MISSING if limit is None else f"100 ± {number(100 * limit.value)} %",
        remarks=remarks(q),
    )


def unknown_rows(record: RunRecord) -> tuple[UnknownRow, ...]:
    """Unknowns, worst first: without a value, then flagged, then the others in the order of the file."""
    found = [q for q in record.evaluation.quantities if q.role == "unknown"]
    return tuple(_unknown(record, q) for q in sorted(found, key=_badness))


def _badness(q: QuantityRecord) -> int:
    return 0 if q.concentration is None else 1 if q.flags else 2


def _unknown(record: RunRecord, q: QuantityRecord) -> UnknownRow:
    """A row; a void run keeps its readings and gives no result."""
    verdict, void = record.evaluation.verdict, record.heading.void_reason is not None
    expanded = MISSING if void else expanded_text(q)
    return UnknownRow(
        sample=q.sample,
        n=str(q.replicates),
        mean_response=significant(q.mean_response),
        dilution=f"× {number(q.dilution)}",
        result=NO_RESULT if void else quantity_text(q, record.lowest_reported, verdict.highest),
        expanded=expanded,
        k=f"{q.k:.2f}" if expanded != MISSING and q.k is not None else MISSING,
        interval=MISSING if void else interval_text(q),
        kind=q.kind if q.concentration is not None and not void else "",
        remarks="the run is void: no result" if void else _remarks_and_statement(record, q),
        marked=void or q.concentration is None or bool(q.flags),
    )


def _remarks_and_statement(record: RunRecord, q: QuantityRecord) -> str:
    statement = statement_of(record.definition, record.evaluation.verdict, q)
    said = "" if statement is None else f"{statement.outcome}: {statement.rule}"
    return "; ".join(part for part in (said, remarks(q)) if part)


def one_kind(record: RunRecord) -> str:
    """Kind of uncertainty, 'curve only' or 'combined', where all unknowns share it; else empty."""
    kinds = {q.kind for q in record.evaluation.quantities if q.role == "unknown"}
    return kinds.pop() if len(kinds) == 1 else ""


def remarks(q: QuantityRecord) -> str:
    """Flags in words; of a censored value none about the interval that is not printed."""
    outside = q.position in ("above", "below")
    return "; ".join(in_words(f) for f in q.flags if not (outside and f in ABOUT_THE_INTERVAL))


def excluded_readings(record: RunRecord) -> tuple[str, ...]:
    """Readings left out of the fit, with their reason: by a person first, then by the rule of the method."""
    by_people = tuple(f"{r.where}: {r.excluded}" for r in record.readings if r.excluded is not None)
    decided = {r.key for r in record.readings if r.excluded is not None}
    by_rule = (s for s in record.evaluation.standards if s.excluded and s.key not in decided)
    return by_people + tuple(f"{s.label}: {s.reason}" for s in by_rule)


def absent_readings(record: RunRecord) -> tuple[str, ...]:
    """Readings without a number, with their cause and place in the file."""
    found = [r for r in record.readings if r.absent_cause is not None]
    return tuple(
        f"{r.where}, {r.role}: {r.absent_cause}" + (f" ({r.place})" if r.place else "") for r in found
    )
