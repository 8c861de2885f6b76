"""calib log and calib quantify."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import click

from calib.cli.options import REJECTED, acting, by_option, echo_json, json_option, moment, opened
from calib.errors import InputError


def file_options(command: Any) -> Any:
    """Options that say what the file does not say itself."""
    for option in (
        click.option("--instrument", metavar="NAME", help="Instrument, where the file does not say it."),
        click.option(
            "--method", "methods", multiple=True, metavar="NAME", help="Method; repeat for several analytes."
        ),
        click.option("--at", metavar="TIME", help="Time of measurement, such as 2026-03-02T08:20."),
        click.option("--lot", metavar="NAME", help="Standard lot."),
        click.option("--layout", metavar="NAME", help="Reading layout, where it is not recognised."),
        by_option,
        json_option,
    ):
        command = option(command)
    return click.argument("file", type=click.Path(path_type=Path))(command)


@click.command()
@file_options
@click.option("--dry-run", is_flag=True, help="Show what was understood and the verdict; write nothing.")
@click.option(
    "--exclude",
    "exclusions",
    multiple=True,
    metavar="READING=CAUSE",
    help="Leave a reading out before the fit, for a cause known apart from it (a spill, the wrong well).",
)
@click.option(
    "--override-lot",
    "lot_override",
    metavar="REASON",
    help="Use a standard lot that is expired or not registered all the same, with the reason.",
)
@click.pass_context
def log(ctx: click.Context, /, file: Path, dry_run: bool, as_json: bool, **said: Any) -> int:
    """Log FILE: show what was understood, fit, judge and quantify in one go."""
    from calib.bench.log_run import evaluate_plan, log_plan
    from calib.bench.plan_run import plan_file

    with opened(ctx) as store:
        evaluated = evaluate_plan(plan_file(store, file, _options(said)))
        if dry_run:
            return _show_dry_run(evaluated, as_json)
        records = log_plan(store, evaluated)
    _show(evaluated.plan, records, as_json)
    return 0 if all(r.evaluation.verdict.accepted for r in records) else REJECTED


@click.command()
@file_options
@click.pass_context
def quantify(ctx: click.Context, /, file: Path, as_json: bool, **said: Any) -> int:
    """Read the unknowns of FILE on the latest accepted curve still in force."""
    from calib.bench.plan_run import plan_file
    from calib.bench.quantify import quantify_plan

    with opened(ctx) as store:
        plan = plan_file(store, file, _options(said))
        records = quantify_plan(store, plan)
    _show(plan, records, as_json)
    return 0


def _options(said: dict[str, Any]) -> Any:
    from calib.bench.plan_run import LogOptions

    return LogOptions(
        by=acting(said["by"]),
        instrument=said["instrument"],
        methods=said["methods"],
        at=moment(said["at"]),
        lot=said["lot"],
        layout=said["layout"],
        exclusions=tuple(_cause(text) for text in said.get("exclusions", ())),
        lot_override=said.get("lot_override"),
    )


def _cause(text: str) -> tuple[str, str]:
    name, sign, cause = text.partition("=")
    if not sign or not name.strip() or not cause.strip():
        raise InputError(f"--exclude {text!r} must be READING=CAUSE, such as 'B7=bubble in the well'")
    return name.strip(), cause.strip()


def _show(plan: Any, records: Any, as_json: bool) -> None:
    if as_json:
        from calib.report.as_json import log_json

        echo_json(log_json(plan.file.name, records))
        return
    from calib.cli.run_screen import show_plan, show_run

    show_plan(plan)
    for record in records:
        show_run(record)


def _show_dry_run(evaluated: Any, as_json: bool) -> int:
    """Preview only: nothing is in the store, so the run has no number."""
    if as_json:
        from calib.report.as_json import preview_json

        echo_json(preview_json(evaluated))
        return 0
    from calib.cli.run_screen import show_plan, show_preview

    show_plan(evaluated.plan)
    for run, evaluation in zip(evaluated.plan.runs, evaluated.evaluations, strict=True):
        show_preview(run.definition, evaluation)
    return 0
