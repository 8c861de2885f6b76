"""calib store."""

from __future__ import annotations

from pathlib import Path

import click

from calib.cli.options import DAMAGED, echo_json, json_option, opened, store_address


@click.group()
def store() -> None:
    """Check, back up and upgrade the store."""


@store.command()
@click.option("--all-curves", is_flag=True, help="Fit every stored curve again, not a sample of 20.")
@json_option
@click.pass_context
def check(ctx: click.Context, all_curves: bool, as_json: bool) -> int:
    """Walk the record chain, every row and original; fit stored curves again and compare."""
    from calib.bench.check_records import check_records
    from calib.cli.screen import progress_bar, say

    with opened(ctx) as opened_store, progress_bar("checking rows") as progress:
        found = check_records(opened_store, all_curves=all_curves, progress=progress)
    if as_json:
        from calib.report.as_json import plain

        echo_json({"schema": "calib-check-1", "sound": found.sound, **plain(found)})
        return 0 if found.sound else DAMAGED
    for finding in found.findings:
        say(f"✗ {finding.code} at {finding.place}: {finding.message}", "bold red")
    say(
        f"{'SOUND' if found.sound else 'DAMAGED'}: {found.entries} chain entries, {found.rows} rows, "
        f"{found.curves} curves fitted again, {len(found.findings)} findings"
    )
    say(f"chain head {found.head_sequence}: {found.head_hash}")
    return 0 if found.sound else DAMAGED


@store.command()
@click.option(
    "--to", "target", required=True, type=click.Path(path_type=Path), help="New file; never overwritten."
)
@json_option
@click.pass_context
def backup(ctx: click.Context, target: Path, as_json: bool) -> int:
    """Copy the store while it is in use, and check the copy."""
    from calib.bench.keep_store import back_up

    with opened(ctx) as opened_store:
        made = back_up(opened_store, target)
    sound = made.check.sound
    if as_json:
        from calib.report.as_json import plain

        echo_json(
            {"schema": "calib-backup-1", "path": str(made.path), "sound": sound, "check": plain(made.check)}
        )
        return 0 if sound else DAMAGED
    click.echo(f"backup written to {made.path}: {made.check.rows} rows, {'sound' if sound else 'DAMAGED'}")
    for finding in made.check.findings:
        click.echo(f"✗ {finding.code} at {finding.place}: {finding.message}")
    return 0 if sound else DAMAGED


@store.command()
@json_option
@click.pass_context
def upgrade(ctx: click.Context, as_json: bool) -> None:
    """Bring an older store to this version, after a backup beside it."""
    from calib.bench.keep_store import upgrade as upgrade_store

    done = upgrade_store(store_address(ctx))
    if as_json:
        echo_json(
            {
                "schema": "calib-upgrade-1",
                "path": str(done.path),
                "before": done.before,
                "after": done.after,
                "backup": None if done.backup is None else str(done.backup),
                "rows": dict(done.rows),
            }
        )
    elif done.backup is None:
        click.echo(f"{done.path} is up to date (schema {done.after})")
    else:
        click.echo(f"{done.path}: schema {done.before} -> {done.after}, {sum(done.rows.values())} rows kept")
        click.echo(f"the store as it was: {done.backup}")
