"""calib instrument."""

from __future__ import annotations

import click

from calib.cli.options import acting, by_option, echo_json, json_option, opened

SCHEMA = "calib-instruments-1"


@click.group()
def instrument() -> None:
    """Register and list instruments."""


@instrument.command()
@click.argument("name")
@click.option("--kind", required=True, metavar="TEXT", help="What it is, such as 'plate photometer'.")
@click.option("--serial", default="", metavar="TEXT", help="Serial number; files of another one are refused.")
@click.option("--location", default="", metavar="TEXT", help="Where it stands.")
@click.option("--response-ceiling", type=float, help="Response at which its detector saturates.")
@click.option("--utc-offset", type=int, default=0, metavar="MINUTES", help="Offset of its clock from UTC.")
@by_option
@click.pass_context
def add(
    ctx: click.Context,
    name: str,
    kind: str,
    serial: str,
    location: str,
    response_ceiling: float | None,
    utc_offset: int,
    by: str | None,
) -> None:
    """Register instrument NAME."""
    from calib.bench.register import add_instrument

    with opened(ctx, create=True) as store:
        add_instrument(
            store,
            name,
            kind=kind,
            serial=serial,
            location=location,
            response_ceiling=response_ceiling,
            utc_offset_minutes=utc_offset,
            by=acting(by),
        )
    click.echo(f"instrument {name} registered")


@instrument.command("list")
@json_option
@click.pass_context
def list_(ctx: click.Context, as_json: bool) -> None:
    """All instruments."""
    from calib.bench.register import list_instruments

    with opened(ctx) as store:
        records = list_instruments(store)
    if as_json:
        from calib.report.as_json import listing_json

        echo_json(listing_json(SCHEMA, "instruments", records))
        return
    from calib.cli.screen import print_table

    print_table(
        ("Instrument", "Kind", "Serial", "Location", ">Runs"),
        [(r.name, r.kind, r.serial, r.location, str(r.runs)) for r in records],
    )


@instrument.command()
@click.argument("name")
@json_option
@click.pass_context
def show(ctx: click.Context, name: str, as_json: bool) -> None:
    """Instrument NAME, its events and its latest runs."""
    from calib.bench.register import list_events, show_instrument
    from calib.bench.show_run import list_runs

    with opened(ctx) as store:
        record, events = show_instrument(store, name), list_events(store, name)
        runs = list_runs(store, instrument=name, last=5)
    if as_json:
        from calib.report.as_json import plain

        echo_json(
            {
                "schema": SCHEMA,
                "instrument": plain(record),
                "events": plain(events),
                "latest_runs": plain(runs),
            }
        )
        return
    from calib.cli.screen import print_table, say
    from calib.report.wording import number

    ceiling = "not stated" if record.response_ceiling is None else number(record.response_ceiling)
    say(f"{record.name}: {record.kind}, serial {record.serial or 'not stated'}, {record.location}", "bold")
    say(
        f"  response ceiling {ceiling}; clock {record.utc_offset_minutes:+d} min from UTC; {record.runs} runs"
    )
    print_table(
        ("When", "Event", "What", "By"), [(f"{e.at:%Y-%m-%d %H:%M}", e.kind, e.what, e.by) for e in events]
    )
    print_table(
        (">Run", "Measured", "Method", "Verdict"),
        [(str(r.id), f"{r.at:%Y-%m-%d %H:%M}", r.method, r.decision or "unknowns only") for r in runs],
    )
