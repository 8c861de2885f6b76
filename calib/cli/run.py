"""calib run: list, show and correct runs."""

from __future__ import annotations

from typing import TYPE_CHECKING

import click

from calib.cli.options import (
    REJECTED,
    acting,
    by_option,
    echo_json,
    json_option,
    moment,
    opened,
    reason_option,
)
from calib.errors import InputError

if TYPE_CHECKING:
    from calib.bench.records import RunRecord


@click.group()
def run() -> None:
    """List, show and correct runs. A correction supersedes; nothing is overwritten."""


@run.command("list")
@click.option("--instrument", metavar="NAME", help="Only this instrument.")
@click.option("--method", metavar="NAME", help="Only this method.")
@click.option("--last", type=click.IntRange(min=1), help="Only so many of the latest.")
@json_option
@click.pass_context
def list_(
    ctx: click.Context, instrument: str | None, method: str | None, last: int | None, as_json: bool
) -> None:
    """Runs in the order they were measured."""
    from calib.bench.show_run import list_runs

    with opened(ctx) as store:
        lines = list_runs(store, instrument=instrument, method=method, last=last)
    if as_json:
        from calib.report.as_json import RUNS, listing_json

        echo_json(listing_json(RUNS, "runs", lines))
        return
    from calib.cli.screen import print_table

    print_table(
        (">Run", "Measured", "Instrument", "Method", "By", "Verdict", "File"),
        [
            (
                str(line.id),
                f"{line.at:%Y-%m-%d %H:%M}",
                line.instrument,
                f"{line.method} v{line.method_version}",
                line.operator,
                "void" if line.void else line.decision or "unknowns only",
                line.file,
            )
            for line in lines
        ],
    )


@run.command()
@click.argument("number", type=int)
@click.option("--rules", is_flag=True, help="Every criterion with limit, observed value and source.")
@click.option("--sample", metavar="NAME", help="The uncertainty budget of this sample.")
@click.option(
    "--monte-carlo", is_flag=True, help="With --sample: its interval by propagating distributions too."
)
@click.option(
    "--seed", type=click.IntRange(min=0), help="Of the Monte Carlo; the same one gives the same digits."
)
@json_option
@click.pass_context
def show(
    ctx: click.Context,
    number: int,
    rules: bool,
    sample: str | None,
    monte_carlo: bool,
    seed: int | None,
    as_json: bool,
) -> None:
    """Show run NUMBER as it stands now."""
    from calib.bench.show_run import show_run

    with opened(ctx) as store:
        record = show_run(store, number)
    if monte_carlo and sample is None:
        raise InputError("--monte-carlo needs --sample: say for which sample")
    if sample is not None:
        _show_sample(record, sample, monte_carlo, seed, as_json)
        return
    if rules and not as_json:
        from calib.cli.run_screen import show_rules, show_verdict

        show_verdict(record)
        show_rules(record.evaluation.verdict)
        return
    _show(record, as_json)


@run.command()
@click.argument("number", type=int)
@click.argument("readings", nargs=-1, required=True)
@reason_option
@click.option(
    "--cause",
    default="other",
    show_default=True,
    metavar="KIND",
    help="Kind of reason: assignable cause (known apart from the fit), outlying or other.",
)
@by_option
@json_option
@click.pass_context
def exclude(
    ctx: click.Context,
    number: int,
    readings: tuple[str, ...],
    reason: str,
    cause: str,
    by: str | None,
    as_json: bool,
) -> int:
    """Leave READINGS (position, sample name or #number) of run NUMBER out of the fit."""
    from calib.bench.correct_run import exclude_readings

    with opened(ctx) as store:
        record = exclude_readings(store, number, readings, reason=reason, reason_class=cause, by=acting(by))
    return _show(record, as_json)


@run.command()
@click.argument("number", type=int)
@click.argument("readings", nargs=-1, required=True)
@reason_option
@by_option
@json_option
@click.pass_context
def restore(
    ctx: click.Context, number: int, readings: tuple[str, ...], reason: str, by: str | None, as_json: bool
) -> int:
    """Take excluded READINGS of run NUMBER back into the fit."""
    from calib.bench.correct_run import restore_readings

    with opened(ctx) as store:
        record = restore_readings(store, number, readings, reason=reason, by=acting(by))
    return _show(record, as_json)


@run.command()
@click.argument("number", type=int)
@reason_option
@by_option
@json_option
@click.pass_context
def refit(ctx: click.Context, number: int, reason: str, by: str | None, as_json: bool) -> int:
    """Fit and judge run NUMBER again; the new curve supersedes the old one."""
    from calib.bench.correct_run import refit_run

    with opened(ctx) as store:
        record = refit_run(store, number, reason=reason, by=acting(by))
    return _show(record, as_json)


@run.command()
@click.argument("number", type=int)
@click.option("--instrument", metavar="NAME", help="The instrument it was measured on.")
@click.option("--lot", metavar="NAME", help="The standard lot that was used.")
@click.option("--operator", metavar="NAME", help="Who measured.")
@click.option("--at", metavar="TIME", help="When it was measured.")
@click.option("--sample", "samples", multiple=True, metavar="READING=NAME", help="New name of a sample.")
@click.option("--dilution", "dilutions", multiple=True, metavar="READING=FACTOR", help="New dilution factor.")
@reason_option
@by_option
@json_option
@click.pass_context
def amend(
    ctx: click.Context,
    number: int,
    instrument: str | None,
    lot: str | None,
    operator: str | None,
    at: str | None,
    samples: tuple[str, ...],
    dilutions: tuple[str, ...],
    reason: str,
    by: str | None,
    as_json: bool,
) -> int:
    """Correct facts of run NUMBER; the original stays beside the amendment."""
    from calib.bench.amend_run import Change, amend_run

    change = Change(
        instrument=instrument,
        lot=lot,
        operator=operator,
        at=moment(at),
        samples=tuple(_pair(s, "--sample") for s in samples),
        dilutions=tuple(
            (name, _factor(name, value)) for name, value in (_pair(d, "--dilution") for d in dilutions)
        ),
    )
    with opened(ctx) as store:
        record = amend_run(store, number, change, reason=reason, by=acting(by))
    return _show(record, as_json)


@run.command()
@click.argument("number", type=int)
@reason_option
@by_option
@json_option
@click.pass_context
def void(ctx: click.Context, number: int, reason: str, by: str | None, as_json: bool) -> int:
    """Declare that run NUMBER counts no longer; it stays visible."""
    from calib.bench.correct_run import void_run

    with opened(ctx) as store:
        record = void_run(store, number, reason=reason, by=acting(by))
    _show(record, as_json)
    return 0


def _show_sample(record: RunRecord, sample: str, monte_carlo: bool, seed: int | None, as_json: bool) -> None:
    from calib.bench.cross_check import cross_check

    _require_sample(record, sample)
    drawn = cross_check(record, sample, seed) if monte_carlo else ()
    if as_json:
        from calib.report.run_sample_json import sample_json

        echo_json(sample_json(record, sample, drawn))
        return
    from calib.cli.budget_screen import show_sample_budgets

    show_sample_budgets(record, sample, drawn)


def _require_sample(record: RunRecord, sample: str) -> None:
    known = list(dict.fromkeys(q.sample for q in record.evaluation.quantities))
    if sample not in known:
        raise InputError(
            f"run {record.heading.id} has no sample '{sample}'; it has {', '.join(known) or 'none'}"
        )


def _pair(text: str, option: str) -> tuple[str, str]:
    name, sign, value = text.rpartition("=")
    if not sign or not name or not value:
        raise InputError(
            f"{option} {text!r} must be READING=VALUE, such as B7={'10' if 'dil' in option else 'L-17'}"
        )
    return name, value


def _factor(name: str, text: str) -> float:
    try:
        return float(text)
    except ValueError as cause:
        raise InputError(f"--dilution {name}={text}: {text!r} is no number") from cause


def _show(record: RunRecord, as_json: bool) -> int:
    if as_json:
        from calib.report.as_json import run_json

        echo_json(run_json(record))
    else:
        from calib.cli.run_screen import show_run

        show_run(record)
    return 0 if record.evaluation.verdict.accepted else REJECTED
