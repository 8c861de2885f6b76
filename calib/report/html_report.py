"""The report of a run as one page that needs nothing else: style and picture are inside."""

from __future__ import annotations

import platform
import re
from functools import cache
from importlib import metadata
from typing import TYPE_CHECKING, Any

from calib.report import curve_wording, run_rows
from calib.report.budget_rows import left_out_in_words, sample_budgets
from calib.report.curve_figure import curve_figure
from calib.report.files import picture
from calib.report.review_wording import status_line
from calib.report.wording import LEVEL_DIGITS, number, visible, with_unit

if TYPE_CHECKING:
    from jinja2 import Template

    from calib.bench.records import ReportStamp, RunRecord

CAUTIONS = (
    "The validated method and the rules a laboratory works under come first; a preset is an aid, and the "
    "laboratory confirms every limit before use.",
    "'Curve only' is a part of the measurement uncertainty: it leaves out standards, volumes, sampling and "
    "recovery. A statement of compliance needs a decision rule.",
    "Nothing is reported outside the calibrated range. Near a plateau an interval is wide, lopsided or "
    "open on one side.",
    "r² is no evidence of fit and never judged by itself.",
    "Weighting rests on the noise model named here; several readings of one preparation are not independent.",
    "The record chain shows that something was changed; it does not prevent it. Names say who acted, they "
    "do not prove it.",
    "Not a medical device; not for diagnosis or treatment.",
)
# Of the program that draws the picture; a page must not refer to anything outside itself.
UNWANTED = re.compile(r"<metadata>.*?</metadata>|<!--.*?-->", re.DOTALL)


def render_run(record: RunRecord, stamp: ReportStamp | None = None) -> str:
    """Lay out a run as one self-contained HTML page, A4 when printed.

    Parameters
    ----------
    record : RunRecord
    stamp : ReportStamp, optional
        Of an issued report; without it, and without an approval, the page is a draft.

    Returns
    -------
    str
        The same text for the same record and versions.
    """
    return template("run.html.j2").render(view=_view(record, stamp), record=record)


@cache
def template(name: str) -> Template:
    """Load a page of this package: what is put into it is escaped, undefined names are errors."""
    from jinja2 import Environment, PackageLoader, StrictUndefined

    environment = Environment(
        loader=PackageLoader("calib.report", "templates"),
        autoescape=True,
        undefined=StrictUndefined,
        finalize=_made_visible,
        trim_blocks=True,
        lstrip_blocks=True,
    )
    return environment.get_template(name)


def _made_visible(value: Any) -> Any:
    """Write out characters that would reorder or hide text; markup of our own passes."""
    return visible(value) if type(value) is str else value


def _view(record: RunRecord, stamp: ReportStamp | None) -> dict[str, Any]:
    """Everything the page says, as words."""
    curve, definition = record.evaluation.curve, record.definition
    budget_names, budgets = sample_budgets(record)
    units = (definition.concentration_unit, definition.response_unit)
    return {
        "title": title(record),
        "status": status(record),
        "review": status_line(record.review, stamp),
        "draft": not record.review.approved,
        "chain_sequence": stamp.chain_sequence if stamp else record.chain_sequence,
        "chain_head": stamp.chain_head if stamp else record.chain_head,
        "issued": f"{stamp.at:%Y-%m-%d %H:%M %z} by {stamp.by}" if stamp else "",
        "calibrated_range": calibrated_range(record),
        "picture": _inline_picture(record),
        "equation": curve_wording.equation(curve),
        "parameters": curve_wording.parameter_rows(curve, *units),
        "residual_sd": curve_wording.residual_sd_text(curve, *units),
        "outlying": record.evaluation.outlying and curve_wording.outlying_text(record.evaluation.outlying),
        "effects": curve_wording.effect_rows(record.evaluation.outlying)
        if record.evaluation.outlying
        else (),
        "interval_scale": curve_wording.interval_scale_text(record.evaluation),
        "history": curve_wording.history_text(record.evaluation.history)
        if record.evaluation.history
        else None,
        "r_squared": number(record.evaluation.verdict.r_squared),
        "valid_for": f"{number(definition.valid_hours)} h",
        "confidence": f"{number(100 * definition.interval_confidence)} %",
        "standards": run_rows.standard_rows(record),
        "reasons": run_rows.reasons(record),
        "warnings": run_rows.warnings(record),
        "rules": run_rows.rule_rows(record),
        "blanks": run_rows.blank_rows(record),
        "checks": run_rows.check_rows(record),
        "unknowns": run_rows.unknown_rows(record),
        "one_kind": run_rows.one_kind(record),
        "budget_names": budget_names,
        "budgets": budgets,
        "left_out": left_out_in_words(record.evaluation),
        "excluded": run_rows.excluded_readings(record),
        "absent": run_rows.absent_readings(record),
        "lot": lot_in_words(record),
        "fitted_with": ", ".join(f"{name} {version}" for name, version in sorted(record.versions.items())),
        "versions": _versions(),
        "cautions": CAUTIONS,
    }


def title(record: RunRecord) -> str:
    """Name the run in one line."""
    heading = record.heading
    number_of = f"Run {heading.id}" if heading.id is not None else "Run not yet logged"
    what = "unknowns on an earlier curve" if heading.kind == "unknowns" else "calibration"
    return f"{number_of}: {what}, {record.definition.analyte} on {heading.instrument}"


def status(record: RunRecord) -> str:
    """One word for the verdict, void first."""
    if record.heading.void_reason is not None:
        return "void"
    return record.evaluation.verdict.decision


def calibrated_range(record: RunRecord) -> str:
    """Lowest to highest standard in force."""
    verdict = record.evaluation.verdict
    if verdict.lowest is None or verdict.highest is None:
        return "none"
    ends = f"{number(verdict.lowest, LEVEL_DIGITS)} to {number(verdict.highest, LEVEL_DIGITS)}"
    return with_unit(ends, record.definition.concentration_unit)


def lot_in_words(record: RunRecord) -> str:
    """Standard lot with certificate, value, expanded uncertainty and expiry."""
    lot = record.lot
    if lot is None:
        return "not named"
    parts = [f"{lot.prepared}, prepared from {lot.name}" if lot.prepared else lot.name]
    if lot.certified_value is not None:
        value = number(lot.certified_value)
        if lot.expanded_uncertainty is not None:
            value += f" ± {number(lot.expanded_uncertainty)}"
        k = f" (k = {number(lot.coverage_factor)})" if lot.coverage_factor is not None else ""
        parts.append(with_unit(value, lot.unit or "1") + k)
    if lot.certificate:
        parts.append(f"certificate {lot.certificate}")
    if lot.expiry is not None:
        parts.append(f"expires {lot.expiry.isoformat()}")
    return ", ".join(parts)


def _inline_picture(record: RunRecord) -> Any:
    from markupsafe import Markup

    drawn = picture(curve_figure(record), "svg").decode()
    return Markup(UNWANTED.sub("", drawn[drawn.index("<svg") :]))


def _versions() -> str:
    libraries = ", ".join(f"{name} {metadata.version(name)}" for name in ("numpy", "scipy", "matplotlib"))
    return f"{_own_version()}, Python {platform.python_version()}, {libraries}"


def _own_version() -> str:
    from calib import __version__

    return f"calib {__version__}"
