"""calib action: corrective actions."""

from __future__ import annotations

from typing import TYPE_CHECKING

import click

from calib.cli.options import acting, by_option, echo_json, json_option, moment, opened

if TYPE_CHECKING:
    from calib.bench.actions import ActionRecord


@click.group()
def action() -> None:
    """Corrective actions: opened with the results they affect, closed with what was done."""


@action.command("open")
@click.argument("kind")
@click.argument("name")
@click.option("--what", required=True, metavar="TEXT", help="What went wrong, in words.")
@click.option("--since", metavar="TIME", help="Only results of runs measured from then on.")
@click.option("--until", metavar="TIME", help="Only results of runs measured up to then.")
@by_option
@json_option
@click.pass_context
def open_(
    ctx: click.Context,
    kind: str,
    name: str,
    what: str,
    since: str | None,
    until: str | None,
    by: str | None,
    as_json: bool,
) -> None:
    """Open an action about KIND NAME: a lot, instrument, method, file, layout, curve or run."""
    from calib.bench.actions import open_action

    with opened(ctx) as store:
        record = open_action(
            store,
            kind,
            name,
            what=what,
            by=acting(by),
            since=moment(since, "--since"),
            until=moment(until, "--until"),
        )
    _told(record, as_json, f"action {record.number} opened: {record.results} results affected")


@action.command()
@click.argument("number", type=int)
@click.option("--correction", required=True, metavar="TEXT", help="What was done.")
@click.option("--effect", required=True, metavar="TEXT", help="How it is known to have helped.")
@by_option
@json_option
@click.pass_context
def close(
    ctx: click.Context, number: int, correction: str, effect: str, by: str | None, as_json: bool
) -> None:
    """Close action NUMBER."""
    from calib.bench.actions import close_action

    with opened(ctx) as store:
        record = close_action(store, number, correction=correction, effect=effect, by=acting(by))
    _told(record, as_json, f"action {record.number} closed by {record.closed_by}")


@action.command("list")
@click.option("--open", "only_open", is_flag=True, help="Only those still open.")
@json_option
@click.pass_context
def list_(ctx: click.Context, only_open: bool, as_json: bool) -> None:
    """Actions in the order they were opened."""
    from calib.bench.actions import list_actions

    with opened(ctx) as store:
        records = list_actions(store, only_open=only_open)
    if as_json:
        from calib.report.as_json import listing_json

        echo_json(listing_json("calib-actions-1", "actions", records))
        return
    from calib.cli.screen import print_table

    print_table(
        (">Action", "Opened (UTC)", "By", "About", "What", ">Results", "Closed"),
        [
            (
                str(a.number),
                f"{a.at:%Y-%m-%d %H:%M}",
                a.by,
                f"{a.kind} {a.name}",
                a.what,
                str(a.results),
                "open" if a.open else f"{a.closed_at:%Y-%m-%d} {a.closed_by}: {a.correction}",
            )
            for a in records
        ],
    )


@action.command()
@click.argument("number", type=int)
@json_option
@click.pass_context
def show(ctx: click.Context, number: int, as_json: bool) -> None:
    """Action NUMBER, and the results it affected as they stand now."""
    from calib.bench.actions import show_action

    with opened(ctx) as store:
        record, results = show_action(store, number)
    if as_json:
        from calib.report.as_json import plain

        echo_json({"schema": "calib-action-1", "action": plain(record), "results": plain(results)})
        return
    from calib.cli.screen import say
    from calib.cli.trace import show_affected

    say(f"action {record.number}, {record.kind} {record.name}: {record.what}", "bold")
    say(f"  opened {record.at:%Y-%m-%d %H:%M} UTC by {record.by}")
    if record.closed_at is not None:
        say(f"  closed {record.closed_at:%Y-%m-%d %H:%M} UTC by {record.closed_by}: {record.correction}")
        say(f"  effect: {record.effect}")
    show_affected(results)


def _told(record: ActionRecord, as_json: bool, words: str) -> None:
    if as_json:
        from calib.report.as_json import plain

        echo_json({"schema": "calib-action-1", "action": plain(record)})
    else:
        click.echo(words)
