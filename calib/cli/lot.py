"""calib lot."""

from __future__ import annotations

from datetime import date
from typing import Any

import click

from calib.cli.options import acting, by_option, echo_json, json_option, opened
from calib.errors import InputError

SCHEMA = "calib-lots-1"


@click.group()
def lot() -> None:
    """Register and list standard lots."""


@lot.command()
@click.argument("name")
@click.option("--material", required=True, metavar="TEXT", help="What it is.")
@click.option("--certified-value", type=float, help="Value on the certificate.")
@click.option("--unit", metavar="UNIT", help="Its unit.")
@click.option("--expanded-uncertainty", type=float, help="U on the certificate.")
@click.option("--coverage-factor", type=float, help="k that belongs to U.")
@click.option("--expiry", metavar="DATE", help="Last day of use, such as 2026-09-30.")
@click.option("--supplier", metavar="TEXT", help="Who made it.")
@click.option("--certificate", metavar="TEXT", help="Number of the certificate.")
@click.option("--traceability", metavar="TEXT", help="To what its value is traceable.")
@by_option
@click.pass_context
def add(ctx: click.Context, /, name: str, by: str | None, expiry: str | None, **facts: Any) -> None:
    """Register standard lot NAME."""
    from calib.bench.register import LotRecord, add_lot

    with opened(ctx, create=True) as store:
        add_lot(store, LotRecord(name=name, expiry=_day(expiry), **facts), by=acting(by))
    click.echo(f"standard lot {name} registered")


def _day(text: str | None) -> date | None:
    if text is None:
        return None
    try:
        return date.fromisoformat(text)
    except ValueError as cause:
        raise InputError(f"--expiry {text!r} is no day; write 2026-09-30") from cause


@lot.command("list")
@json_option
@click.pass_context
def list_(ctx: click.Context, as_json: bool) -> None:
    """All standard lots."""
    from calib.bench.register import list_lots

    with opened(ctx) as store:
        records = list_lots(store)
    if as_json:
        from calib.report.as_json import listing_json

        echo_json(listing_json(SCHEMA, "lots", records))
        return
    from calib.cli.screen import print_table
    from calib.report.wording import number

    print_table(
        ("Lot", "Material", "Certified value", "Expiry", "Certificate"),
        [
            (
                r.name,
                r.material,
                ""
                if r.certified_value is None
                else f"{number(r.certified_value)} {r.unit}"
                + (
                    f" ± {number(r.expanded_uncertainty)} (k = {number(r.coverage_factor or 0)})"
                    if r.expanded_uncertainty
                    else ""
                ),
                "" if r.expiry is None else r.expiry.isoformat(),
                r.certificate or "",
            )
            for r in records
        ],
    )
