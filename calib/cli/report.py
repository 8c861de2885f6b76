"""calib report and calib plot."""

from __future__ import annotations

from pathlib import Path

import click

from calib.cli.options import opened


@click.command()
@click.argument("number", type=int)
@click.option("--to", "target", required=True, type=click.Path(path_type=Path), help="File: .html or .json.")
@click.pass_context
def report(ctx: click.Context, number: int, target: Path) -> None:
    """Write the report of run NUMBER."""
    from calib.bench.show_run import show_run
    from calib.report.files import write_report

    with opened(ctx) as store:
        record = show_run(store, number)
    write_report(record, target)
    click.echo(f"report of run {number} written to {target}")


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
