"""calib review: the second person."""

from __future__ import annotations

from typing import TYPE_CHECKING

import click

from calib.cli.options import acting, by_option, echo_json, json_option, moment, opened, reason_option

if TYPE_CHECKING:
    from calib.bench.exceptions import RunException

SCHEMA = "calib-review-1"


@click.group()
def review() -> None:
    """What waits for a second person, exceptions first; approve it or return it."""


@review.command("list")
@click.option("--instrument", metavar="NAME", help="Only this instrument.")
@click.option("--method", metavar="NAME", help="Only this method.")
@click.option("--since", metavar="TIME", help="Only runs measured from then on.")
@click.option("--all", "everything", is_flag=True, help="Reviewed runs as well.")
@json_option
@click.pass_context
def list_(
    ctx: click.Context,
    instrument: str | None,
    method: str | None,
    since: str | None,
    everything: bool,
    as_json: bool,
) -> None:
    """Runs that wait for review, those with most exceptions first."""
    from calib.bench.review_runs import runs_to_review

    with opened(ctx) as store:
        lines = runs_to_review(
            store,
            instrument=instrument,
            method=method,
            since=moment(since, "--since"),
            reviewed_too=everything,
        )
    if as_json:
        from calib.report.as_json import listing_json

        echo_json(listing_json(SCHEMA, "runs", lines))
        return
    from calib.cli.screen import print_table, say

    print_table(
        (">Run", "Measured", "Instrument", "Method", "By", "Verdict", "Review", "Exceptions"),
        [
            (
                str(line.run.id),
                f"{line.run.at:%Y-%m-%d %H:%M}",
                line.run.instrument,
                line.run.method,
                line.run.operator,
                line.run.decision or "unknowns only",
                line.state.state,
                tuple(f"{e.kind}: {e.what}" for e in line.exceptions),
            )
            for line in lines
        ],
    )
    with_any = sum(1 for line in lines if line.exceptions)
    say(f"{len(lines)} runs, {with_any} with exceptions")


@review.command()
@click.argument("number", type=int)
@json_option
@click.pass_context
def show(ctx: click.Context, number: int, as_json: bool) -> None:
    """Run NUMBER for the reviewer: exceptions, whether its digits come out again, and the run."""
    from calib.bench.check_records import refit_again
    from calib.bench.review_runs import exceptions_of
    from calib.bench.show_run import show_run

    with opened(ctx) as store:
        record, exceptions = show_run(store, number), exceptions_of(store, number)
        difference = refit_again(store, record.curve_run or number)
    if as_json:
        from calib.report.as_json import plain, run_json

        echo_json(
            {
                "schema": "calib-review-run-1",
                "exceptions": plain(exceptions),
                "recalculated": {"same": difference is None, "difference": plain(difference)},
                **run_json(record),
            }
        )
        return
    from calib.cli.run_screen import show_run as show_on_screen
    from calib.cli.screen import say

    _say_exceptions(exceptions)
    say(
        "  fitted again now: the same digits"
        if difference is None
        else f"  ✗ fitted again now: {difference.message}"
    )
    show_on_screen(record)


@review.command()
@click.argument("numbers", nargs=-1, required=True, type=int)
@click.option("--comment", metavar="TEXT", help="What the reviewer wants to say.")
@by_option
@click.pass_context
def approve(ctx: click.Context, numbers: tuple[int, ...], comment: str | None, by: str | None) -> None:
    """Approve runs NUMBERS as they stand: their results may be reported."""
    from calib.bench.review_runs import approve_run

    with opened(ctx) as store:
        for number in numbers:
            record = approve_run(store, number, by=acting(by), comment=comment)
            own = ", who also had a hand in it (a setting allows that)" if record.review.own_work else ""
            click.echo(f"run {number} approved by {record.review.by}{own}")


@review.command("return")
@click.argument("number", type=int)
@reason_option
@by_option
@click.pass_context
def return_(ctx: click.Context, number: int, reason: str, by: str | None) -> None:
    """Return run NUMBER to its analyst, with the reason."""
    from calib.bench.review_runs import return_run

    with opened(ctx) as store:
        record = return_run(store, number, by=acting(by), reason=reason)
    click.echo(f"run {number} returned by {record.review.by}: {reason}")


def _say_exceptions(exceptions: tuple[RunException, ...]) -> None:
    from calib.cli.screen import say

    say(f"{len(exceptions)} exceptions" if exceptions else "no exceptions", "bold")
    for exception in exceptions:
        say(f"  ! {exception.kind}: {exception.what}")
