"""How a run looks on the screen: verdict first, then why, then the samples, worst first."""

from __future__ import annotations

from collections.abc import Iterable
from itertools import groupby
from typing import TYPE_CHECKING

from calib.bench.flags import in_words
from calib.bench.records import lowest_reported
from calib.cli.screen import print_table, say
from calib.report.budget_rows import left_out_in_words
from calib.report.curve_wording import (
    NOT_IDENTIFIED,
    effects_text,
    history_text,
    interval_scale_text,
    outlying_text,
)
from calib.report.review_wording import status_line
from calib.report.wording import LARGEST_PLAIN, SMALLEST_PLAIN, number, percent, result_text, rounded

if TYPE_CHECKING:
    from calib.acceptance import CriterionResult
    from calib.bench.method_definition import MethodDefinition
    from calib.bench.plan_run import LogPlan
    from calib.bench.records import Evaluation, QuantityRecord, RunRecord, StandardRecord, VerdictRecord

STYLES = {"accepted": "bold green", "accepted with exclusions": "bold yellow", "rejected": "bold red"}


def show_plan(plan: LogPlan) -> None:
    """What was understood of a file."""
    say(f"{plan.file.name}: read as {plan.file.layout}")
    for sentence in plan.file.understood:
        say(f"  · {sentence}")
    for run in plan.runs:
        lot = f", lot {run.material}" if run.material else ""
        say(
            f"  · instrument {run.instrument.name}, method {run.method.name} version {run.method.version}, "
            f"measured {run.at:%Y-%m-%d %H:%M %z} by {run.operator}{lot}"
        )
        for note in run.notes:
            say(f"  · {note}")


def show_run(record: RunRecord) -> None:
    """One run: verdict, curve, standards, checks, samples."""
    heading, definition = record.heading, record.definition
    if heading.kind == "calibration":
        show_verdict(record)
        show_curve(record.evaluation)
        show_standards(record.evaluation.standards, definition.concentration_unit)
    else:
        say(
            f"run {heading.id}: unknowns on {heading.instrument}, read on the curve of run {record.curve_run}",
            "bold",
        )
    if heading.void_reason is not None:
        say(f"VOID: {heading.void_reason}", "bold red")
    else:
        say(f"  {status_line(record.review)}")
    show_checks(record.evaluation, definition)
    show_samples(record.evaluation, definition)
    if record.dependents:
        say(f"  samples of run {', '.join(map(str, record.dependents))} are read on this curve")
    for amendment in record.amendments:
        say(f"  {amendment.at:%Y-%m-%d %H:%M} {amendment.by}: {amendment.what}: {amendment.reason}")


def show_preview(definition: MethodDefinition, evaluation: Evaluation) -> None:
    """What logging would come to; nothing is in the store."""
    verdict = evaluation.verdict
    say(f"would be {verdict.decision}; nothing was written (--dry-run)", STYLES[verdict.decision])
    show_reasons(verdict)
    show_curve(evaluation)
    show_standards(evaluation.standards, definition.concentration_unit)
    show_checks(evaluation, definition)
    show_samples(evaluation, definition)


def show_verdict(record: RunRecord) -> None:
    """The verdict line, with the failing rules in words and figures."""
    verdict = record.evaluation.verdict
    show_verdict_line(record)
    show_reasons(verdict)
    if verdict.accepted and verdict.lowest is not None and verdict.highest is not None:
        say(
            f"  calibrated range {number(verdict.lowest)} to {number(verdict.highest)} "
            f"{record.definition.concentration_unit}"
        )


def show_verdict_line(record: RunRecord) -> None:
    """The verdict, with run, instrument, method, time and person."""
    heading, verdict = record.heading, record.evaluation.verdict
    say(
        f"{verdict.decision.upper()}   run {heading.id} · {heading.instrument} · {heading.method} "
        f"v{heading.method_version} · {heading.at:%Y-%m-%d %H:%M} · {heading.operator}",
        STYLES[verdict.decision],
    )


def show_reasons(verdict: VerdictRecord) -> None:
    """The failing rules in words and figures."""
    for reason in verdict.reasons:
        say(f"  ✗ {reason}")
    for warning in verdict.warnings:
        say(f"  ! warning, rejects nothing: {warning}")


def show_rules(verdict: VerdictRecord) -> None:
    """Every criterion with its limit, what was observed, and the source."""
    print_table(
        ("Criterion", ">Limit", ">Observed", "Passed", "Source"),
        [
            (
                c.what,
                "" if c.limit is None else number(c.limit),
                "–" if c.observed is None else number(c.observed),
                _kept(c),
                c.source,
            )
            for c in verdict.criteria
        ],
    )


def _kept(criterion: CriterionResult) -> str:
    if criterion.limit is not None and criterion.observed is None and criterion.passed:
        return "nothing to judge"
    if not criterion.passed and criterion.warns:
        return "no (warning)"
    return "yes" if criterion.passed else "NO"


def show_curve(evaluation: Evaluation) -> None:
    """Parameters with their standard uncertainty, and findings."""
    curve = evaluation.curve
    errors = curve.standard_errors
    parts = [
        f"{name} {number(value)} (fixed)" if name in curve.fixed else _with_u(name, value, errors[name])
        for name, value in curve.parameters.items()
    ]
    if curve.identified:
        say(f"  {curve.model}: {', '.join(parts)}")
    else:
        say(f"  {curve.model}: parameters {NOT_IDENTIFIED}; values inside the standards stand")
    say(
        f"  residual SD {number(curve.residual_sd)} with {curve.degrees_of_freedom} degrees of freedom; "
        f"noise {curve.noise.label}"
    )
    if evaluation.history is not None:
        say(f"  noise history: {history_text(evaluation.history)}")
        say(f"  intervals rest on SD {interval_scale_text(evaluation)}")
    for finding in curve.findings:
        say(f"  ! {finding.message}")
    show_outlying(evaluation)


def show_outlying(evaluation: Evaluation) -> None:
    """The reading proposed to be left out, and what that would change."""
    if evaluation.outlying is not None:
        say(f"  ! {outlying_text(evaluation.outlying)}")
        say(f"    {effects_text(evaluation.outlying)}")


def _with_u(name: str, value: float, u: float) -> str:
    if not u > 0 or not SMALLEST_PLAIN <= max(abs(value), u) < LARGEST_PLAIN:
        return f"{name} {number(value)} (u {number(u, 2)})"
    shown, uncertainty = rounded(value, u)
    return f"{name} {shown} (u {uncertainty})"


def show_standards(standards: Iterable[StandardRecord], unit: str) -> None:
    """One line a level: readings, what they read back as, relative errors."""
    ordered = sorted(standards, key=lambda s: (s.role, s.concentration))
    rows = []
    for (role, level), group in groupby(ordered, key=lambda s: (s.role, s.concentration)):
        members = list(group)
        rows.append(
            (
                number(level),
                role,
                "  ".join("–" if s.response is None else number(s.response) for s in members),
                "  ".join("–" if s.back_calculated is None else number(s.back_calculated) for s in members),
                "  ".join(_relative_error(s) for s in members),
                "; ".join(f"{s.label} excluded: {s.reason}" for s in members if s.excluded),
            )
        )
    print_table((f">Level [{unit}]", "Role", "Responses", "Back-calculated", "Relative error", ""), rows)


def _relative_error(standard: StandardRecord) -> str:
    if standard.relative_error is None:
        return standard.absent_cause or "–"
    text = f"{100 * standard.relative_error:+.1f} %".replace("-0.0", "+0.0")
    return f"({text})" if standard.excluded else text


def show_checks(evaluation: Evaluation, definition: MethodDefinition) -> None:
    """Check standards and controls with their recovery."""
    unit = definition.concentration_unit
    rows = []
    for q in evaluation.quantities:
        if q.role == "unknown":
            continue
        found = q.concentration if q.concentration is not None else q.estimate
        recovery = "–" if found is None or not q.nominal else percent(found / q.nominal)
        rows.append((q.role, q.sample, number(q.nominal or 0.0), _cell(q, evaluation, definition), recovery))
    if rows:
        print_table(("Check", "Sample", f">Nominal [{unit}]", ">Found", ">Recovery"), rows)


def show_samples(evaluation: Evaluation, definition: MethodDefinition) -> None:
    """Unknowns, flagged ones first."""
    samples = [q for q in evaluation.quantities if q.role == "unknown"]
    if not samples:
        say("  no unknowns in this run")
        return
    ordered = sorted(samples, key=lambda q: (not q.flags, q.sample, q.dilution))
    confidence = f"{100 * samples[0].confidence:.4g} %"
    print_table(
        ("Sample", ">n", ">Dilution", f">Result ({samples[0].kind}, {confidence})", "Flags"),
        [
            (
                q.sample,
                str(q.replicates),
                f"× {number(q.dilution)}" if q.dilution != 1 else "",
                _cell(q, evaluation, definition),
                "; ".join(in_words(f) for f in q.flags),
            )
            for q in ordered
        ],
    )
    for sentence in left_out_in_words(evaluation):
        say(f"  {sentence}")


def _cell(q: QuantityRecord, evaluation: Evaluation, definition: MethodDefinition) -> str:
    verdict = evaluation.verdict
    lowest = lowest_reported(definition, verdict) if q.role == "unknown" else verdict.lowest
    return result_text(q, lowest, verdict.highest)
