"""The audit lists as a page to print."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from calib.bench.audit import Audit


def period_in_words(found: Audit) -> str:
    """Which runs the lists are about."""
    since = f" from {found.since:%Y-%m-%d %H:%M}" if found.since else ""
    until = f" up to {found.until:%Y-%m-%d %H:%M}" if found.until else ""
    return f"{found.runs} runs measured{since}{until}" if since or until else f"all {found.runs} runs"


def check_in_words(found: Audit) -> str:
    """Result of the check of the store in one line."""
    check = found.check
    state = "sound" if check.sound else f"DAMAGED, {len(check.findings)} findings"
    return (
        f"store {state}: {check.entries} chain entries, {check.rows} rows, {check.curves} curves fitted again; "
        f"chain head {check.head_sequence}: {check.head_hash}"
    )


def render_audit(found: Audit) -> str:
    """Lay out the audit lists as one self-contained HTML page, A4 when printed."""
    from calib.report.html_report import template

    view: dict[str, Any] = {
        "period": period_in_words(found),
        "check": check_in_words(found),
        "at": f"{found.at:%Y-%m-%d %H:%M %z}",
    }
    return template("audit.html.j2").render(view=view, audit=found)
