"""calib event."""

from __future__ import annotations

import click

from calib.cli.options import acting, by_option, echo_json, json_option, moment, opened
from calib.errors import InputError

SCHEMA = "calib-events-1"


@click.group()
def event() -> None:
    """Record what happened to an instrument: lamp change, service, move."""


@event.command()
@click.argument("instrument")
@click.option("--at", required=True, metavar="TIME", help="When, such as 2026-04-08T07:15.")
@click.option(
    "--kind", required=True, metavar="KIND", help="maintenance, part, move, software, lot or other."
)
@click.option("--what", required=True, metavar="TEXT", help="What happened, in words.")
@by_option
@click.pass_context
def add(ctx: click.Context, instrument: str, at: str, kind: str, what: str, by: str | None) -> None:
    """Record an event of INSTRUMENT."""
    from calib.bench.register import add_event

    when = moment(at)
    if when is None:
        raise InputError("give the time of the event with --at")
    with opened(ctx) as store:
        add_event(store, instrument, at=when, kind=kind, what=what, by=acting(by))
    click.echo(f"event of {instrument} recorded")


@event.command("list")
@click.option("--instrument", metavar="NAME", help="Only this instrument.")
@json_option
@click.pass_context
def list_(ctx: click.Context, instrument: str | None, as_json: bool) -> None:
    """Events in the order of time."""
    from calib.bench.register import list_events

    with opened(ctx) as store:
        records = list_events(store, instrument)
    if as_json:
        from calib.report.as_json import listing_json

        echo_json(listing_json(SCHEMA, "events", records))
        return
    from calib.cli.screen import print_table

    print_table(
        ("When", "Instrument", "Event", "What", "By"),
        [(f"{r.at:%Y-%m-%d %H:%M}", r.instrument, r.kind, r.what, r.by) for r in records],
    )
