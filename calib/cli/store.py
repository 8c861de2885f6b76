"""calib store."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import click

from calib.cli.options import DAMAGED, echo_json, json_option, opened, store_address

if TYPE_CHECKING:
    from calib.bench.damage import Damage


@click.group()
def store() -> None:
    """Check, back up, restore, upgrade, export and import the store."""


@store.command()
@click.option("--all-curves", is_flag=True, help="Fit every stored curve again, not a sample of 20.")
@click.option(
    "--against",
    "kept",
    multiple=True,
    metavar="HEAD",
    help="A head kept elsewhere: NUMBER:HASH as on a report, or a file of store head.",
)
@json_option
@click.pass_context
def check(ctx: click.Context, all_curves: bool, kept: tuple[str, ...], as_json: bool) -> int:
    """Walk the record chain, every row and original; fit stored curves again and compare."""
    from calib.bench.check_records import check_records
    from calib.bench.keep_store import kept_heads
    from calib.cli.screen import progress_bar, say

    heads = kept_heads(kept)
    with opened(ctx) as opened_store, progress_bar("checking rows") as progress:
        found = check_records(opened_store, all_curves=all_curves, progress=progress, heads=heads)
    if as_json:
        from calib.report.as_json import plain

        echo_json({"schema": "calib-check-1", "sound": found.sound, **plain(found)})
        return 0 if found.sound else DAMAGED
    for finding in found.findings:
        say(f"✗ {finding.code} at {finding.place}: {finding.message}", "bold red")
    if found.damage is not None:
        _say_damage(found.damage)
    say(
        f"{'SOUND' if found.sound else 'DAMAGED'}: {found.entries} chain entries, {found.rows} rows, "
        f"{found.curves} curves fitted again, {len(found.findings)} findings"
    )
    say(f"chain head {found.head_sequence}: {found.head_hash}")
    return 0 if found.sound else DAMAGED


def _say_damage(damage: Damage) -> None:
    from calib.cli.screen import say

    first = "no entry" if damage.first_entry is None else f"entry {damage.first_entry}"
    say(f"first broken: {first} of the record chain ({damage.first})")
    if damage.runs:
        say(f"  results of runs {', '.join(map(str, damage.runs))} rest on it")
    if damage.reports:
        say(f"  reports {', '.join(map(str, damage.reports))} were issued of these runs")


@store.command()
@click.option("--to", "target", type=click.Path(path_type=Path), help="Write it to a small file as well.")
@json_option
@click.pass_context
def head(ctx: click.Context, target: Path | None, as_json: bool) -> None:
    """The head of the record chain, to keep where whoever writes the store cannot reach it."""
    from calib.bench.restore_store import head_text

    with opened(ctx) as opened_store:
        (sequence, found), text = opened_store.head(), head_text(opened_store)
    if target is not None:
        from calib.report.files import write_file

        write_file(target, text.encode())
    if as_json:
        echo_json({"schema": "calib-head-1", "sequence": sequence, "hash": found})
    else:
        click.echo(f"{sequence}:{found}")


@store.command()
@click.argument("backup_file", metavar="BACKUP", type=click.Path(path_type=Path))
@click.option(
    "--to", "target", type=click.Path(path_type=Path), help="The new store; left out, it is a trial."
)
@json_option
@click.pass_context
def restore(ctx: click.Context, backup_file: Path, target: Path | None, as_json: bool) -> int:
    """Go back to BACKUP in a new file, or try whether one could: checked, every curve fitted again."""
    from calib.bench.restore_store import restore_backup
    from calib.cli.screen import progress_bar, say
    from calib.errors import NotFound

    with progress_bar("checking rows") as progress:
        try:
            with opened(ctx) as present:
                found = restore_backup(backup_file, target, present=present, progress=progress)
        except NotFound:
            found = restore_backup(backup_file, target, present=None, progress=progress)
    if as_json:
        from calib.report.as_json import plain

        told = plain(found) | {"path": None if found.path is None else str(found.path), "sound": found.sound}
        echo_json({"schema": "calib-restore-1", **told})
        return 0 if found.sound else DAMAGED
    for finding in found.check.findings:
        say(f"✗ {finding.code} at {finding.place}: {finding.message}", "bold red")
    if found.of_this_store is False:
        say("✗ its record chain is not the beginning of the one of the store in use", "bold red")
    where = "restored to " + str(found.path) if found.path else "can be restored"
    say(
        f"{backup_file} {where if found.sound else 'CANNOT be relied on'}: {found.check.rows} rows, "
        f"{found.check.curves} curves fitted again"
        + ("" if found.behind is None else f"; {found.behind} entries behind the store in use")
    )
    return 0 if found.sound else DAMAGED


@store.command()
@click.option(
    "--to", "target", required=True, type=click.Path(path_type=Path), help="New .zip; never overwritten."
)
@json_option
@click.pass_context
def export(ctx: click.Context, target: Path, as_json: bool) -> None:
    """Write everything to an open archive: JSON lines and original files, with fingerprints."""
    from calib.bench.keep_store import export_archive
    from calib.cli.screen import progress_bar

    with opened(ctx) as opened_store, progress_bar("writing rows") as progress:
        made = export_archive(opened_store, target, progress)
    if as_json:
        from calib.report.as_json import plain

        echo_json({"schema": "calib-export-1", **plain(made), "path": str(made.path)})
        return
    click.echo(f"archive written to {made.path}: {made.rows} rows, {made.originals} original files")
    click.echo(f"chain head {made.head_sequence}: {made.head_hash}")


@store.command("import")
@click.argument("archive", type=click.Path(path_type=Path))
@json_option
@click.pass_context
def import_(ctx: click.Context, archive: Path, as_json: bool) -> None:
    """Make a new store (--store FILE) from ARCHIVE: the same rows, digits and chain, or nothing."""
    from calib.bench.keep_store import import_archive
    from calib.cli.screen import progress_bar

    with progress_bar("reading rows") as progress:
        made = import_archive(archive, store_address(ctx), progress)
    if as_json:
        from calib.report.as_json import plain

        echo_json({"schema": "calib-import-1", **plain(made), "path": str(made.path)})
        return
    click.echo(f"{made.path}: {made.rows} rows, chain sound to entry {made.head_sequence}")
    click.echo(f"chain head {made.head_sequence}: {made.head_hash}")


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
