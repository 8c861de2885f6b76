"""calib report and calib plot."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import click

from calib.cli.options import acting, by_option, opened

if TYPE_CHECKING:
    from calib.bench.issue_report import Issue


@click.command()
@click.argument("number", type=int)
@click.option(
    "--to", "target", required=True, type=click.Path(path_type=Path), help="File: .html, .json or .csv."
)
@click.option("--reason", metavar="TEXT", help="Why it replaces the report issued before.")
@by_option
@click.pass_context
def report(ctx: click.Context, number: int, target: Path, reason: str | None, by: str | None) -> None:
    """Write the report of run NUMBER: issued with a number where the run is approved, else a DRAFT."""
    from functools import partial

    from calib.bench.issue_report import issue_report
    from calib.report.files import render_report, report_kind, write_file

    kind = report_kind(target)
    with opened(ctx) as store:
        issue = issue_report(
            store, number, kind, partial(render_report, kind=kind), by=acting(by), reason=reason
        )
    write_file(target, issue.content)
    click.echo(f"{_issued(number, issue)} written to {target}")


def _issued(number: int, issue: Issue) -> str:
    if issue.stamp is None:
        return f"DRAFT report of run {number}"
    replaced = f", which replaces report {issue.stamp.replaces}," if issue.stamp.replaces else ""
    copy = "a copy of " if issue.copy else ""
    return f"{copy}report {issue.stamp.number} of run {number}{replaced}"


@click.command()
@click.argument("number", type=int)
@click.option("--to", "target", required=True, type=click.Path(path_type=Path), help="File: .svg or .png.")
@click.pass_context
def plot(ctx: click.Context, number: int, target: Path) -> None:
    """Draw the curve of run NUMBER with its band and relative errors."""
    from calib.bench.show_run import show_run
    from calib.report.figures import curve_figure
    from calib.report.files import write_figure

    with opened(ctx) as store:
        record = show_run(store, number)
    write_figure(curve_figure(record), target)
    click.echo(f"picture of run {number} written to {target}")
