"""calib person: people with their roles, and the rules about records."""

from __future__ import annotations

import click

from calib.cli.options import acting, by_option, echo_json, json_option, opened, reason_option


@click.group()
def person() -> None:
    """Who may measure and who may review, and the laboratory's rules about records.

    Names are recorded, not proven: who may open the store file is the computer's business.
    """


@person.command("set")
@click.argument("name")
@click.option("--role", "roles", multiple=True, metavar="ROLE", help="analyst or reviewer; none: has left.")
@click.option("--reason", metavar="TEXT", help="Why the roles change, in words.")
@by_option
@click.pass_context
def set_(ctx: click.Context, name: str, roles: tuple[str, ...], reason: str | None, by: str | None) -> None:
    """Give NAME (as used with --by) these roles; earlier ones stay on record."""
    from calib.bench.settings import set_roles

    with opened(ctx, create=True) as store:
        record = set_roles(store, name, roles, by=acting(by), reason=reason)
    click.echo(f"{record.name}: {' and '.join(record.roles) or 'no role any more'}")


@person.command("list")
@json_option
@click.pass_context
def list_(ctx: click.Context, as_json: bool) -> None:
    """Everyone registered, and the rules in force."""
    from calib.bench.settings import list_people, list_settings

    with opened(ctx) as store:
        people, settings = list_people(store), list_settings(store)
    if as_json:
        from calib.report.as_json import plain

        echo_json({"schema": "calib-people-1", "people": plain(people), "settings": plain(settings)})
        return
    from calib.cli.screen import print_table, say

    print_table(
        ("Person", "Roles", "Since", "Set by", "Reason"),
        [(p.name, ", ".join(p.roles) or "none", f"{p.at:%Y-%m-%d}", p.by, p.reason or "") for p in people],
    )
    for setting in settings:
        source = f"set by {setting.by}: {setting.reason}" if setting.by else "as calib comes"
        say(f"  {setting.name}: {setting.value} ({source})")


@person.command("setting")
@click.argument("name")
@click.argument("value")
@reason_option
@by_option
@click.pass_context
def setting(ctx: click.Context, name: str, value: str, reason: str, by: str | None) -> None:
    """Set rule NAME to VALUE: own-work refused/allowed, late-after such as '24 h'."""
    from calib.bench.settings import change_setting

    with opened(ctx) as store:
        record = change_setting(store, name, value, by=acting(by), reason=reason)
    click.echo(f"{record.name}: {record.value}")
