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
    """Register and list standard lots and the solutions prepared from them."""


@lot.command()
@click.argument("name")
@click.option("--material", required=True, metavar="TEXT", help="What it is.")
@click.option("--certified-value", type=float, help="Value on the certificate.")
@click.option("--unit", metavar="UNIT", help="Its unit.")
@click.option("--expanded-uncertainty", type=float, help="U on the certificate.")
@click.option("--coverage-factor", type=float, help="k that belongs to U.")
@click.option("--degrees-of-freedom", type=float, help="Of U, where the certificate states them.")
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
        add_lot(store, LotRecord(name=name, expiry=_day(expiry, "--expiry"), **facts), by=acting(by))
    click.echo(f"standard lot {name} registered")


@lot.command()
@click.argument("name")
@click.option(
    "--from", "parent", required=True, metavar="NAME", help="Lot or prepared solution it is made of."
)
@click.option("--taken", required=True, type=float, help="Volume taken of it.")
@click.option("--taken-u", required=True, type=float, help="Standard uncertainty of that volume.")
@click.option("--made-up-to", required=True, type=float, help="Final volume.")
@click.option("--made-up-to-u", required=True, type=float, help="Standard uncertainty of the final volume.")
@click.option(
    "--volume-unit", "unit", default="mL", show_default=True, help="Unit of both: uL, mL, L, or mg, g, kg."
)
@click.option("--prepared-on", metavar="DATE", help="Day of preparation; else today.")
@click.option("--prepared-by", metavar="NAME", help="Who prepared it; else who acts.")
@click.option("--expiry", metavar="DATE", help="Last day of use; else that of what it is made of.")
@click.option(
    "--checked-by", metavar="NAME", help="Second person who checked it (or later: calib lot confirm)."
)
@by_option
@json_option
@click.pass_context
def prepare(
    ctx: click.Context,
    name: str,
    parent: str,
    taken: float,
    taken_u: float,
    made_up_to: float,
    made_up_to_u: float,
    unit: str,
    prepared_on: str | None,
    prepared_by: str | None,
    expiry: str | None,
    checked_by: str | None,
    by: str | None,
    as_json: bool,
) -> None:
    """Register solution NAME, prepared from a lot or from another prepared solution.

    The standard uncertainty of a volume holds everything that makes it uncertain: tolerance of
    the glassware (divided by the root of 6 or 3), filling, temperature.
    """
    from calib.bench.prepared_solutions import PreparationRequest, prepare_solution

    person = acting(by)
    with opened(ctx) as store:
        request = PreparationRequest(
            name,
            parent,
            taken,
            taken_u,
            made_up_to,
            made_up_to_u,
            unit,
            _day(prepared_on, "--prepared-on") or store.now().date(),
            prepared_by or person,
            _day(expiry, "--expiry"),
            checked_by,
        )
        record = prepare_solution(store, request, by=person)
    if as_json:
        from calib.report.solution_json import solution_json

        echo_json(solution_json((record,), ()))
        return
    from calib.report.solution_rows import value_in_words

    click.echo(f"prepared solution {name} registered: {value_in_words(record)}")


@lot.command()
@click.argument("name")
@by_option
@click.pass_context
def confirm(ctx: click.Context, name: str, by: str | None) -> None:
    """Record that a second person checked how prepared solution NAME was made."""
    from calib.bench.prepared_solutions import confirm_preparation

    person = acting(by)
    with opened(ctx) as store:
        confirm_preparation(store, name, by=person)
    click.echo(f"preparation of {name} checked by {person}")


@lot.command("list")
@json_option
@click.pass_context
def list_(ctx: click.Context, as_json: bool) -> None:
    """All standard lots, each with the tree of what was prepared from it."""
    from calib.bench.prepared_solutions import list_solutions
    from calib.bench.register import list_lots

    with opened(ctx) as store:
        records, solutions = list_lots(store), list_solutions(store)
    if as_json:
        from calib.report.as_json import listing_json
        from calib.report.solution_json import solution_line_json

        prepared = [solution_line_json(s) for s in solutions if s.depth]
        echo_json(listing_json(SCHEMA, "lots", records) | {"prepared": prepared})
        return
    from calib.cli.screen import print_table
    from calib.report.solution_rows import HEADINGS, tree_rows

    print_table(HEADINGS, tree_rows(solutions, records))


@lot.command()
@click.argument("name")
@json_option
@click.pass_context
def show(ctx: click.Context, name: str, as_json: bool) -> None:
    """Show lot or prepared solution NAME: its value, what that rests on, what was made from it."""
    from calib.bench.prepared_solutions import show_solution, solutions_from

    with opened(ctx) as store:
        way, made = show_solution(store, name), solutions_from(store, name)
    if as_json:
        from calib.report.solution_json import solution_json

        echo_json(solution_json(way, made))
        return
    from calib.cli.screen import print_table, say
    from calib.report.solution_rows import HEADINGS, PART_HEADINGS, facts_in_words, part_rows, tree_rows

    for sentence in facts_in_words(way[-1]):
        say(sentence)
    print_table(HEADINGS, tree_rows((*way, *made)))
    if way[-1].parts:
        print_table(PART_HEADINGS, part_rows(way[-1]))


def _day(text: str | None, option: str) -> date | None:
    if text is None:
        return None
    try:
        return date.fromisoformat(text)
    except ValueError as cause:
        raise InputError(f"{option} {text!r} is no day; write 2026-09-30") from cause
