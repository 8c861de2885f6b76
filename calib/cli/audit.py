"""calib audit."""

from __future__ import annotations

from pathlib import Path

import click

from calib.cli.options import DAMAGED, echo_json, json_option, moment, opened

AT_MOST = 20


@click.command()
@click.option("--since", metavar="TIME", help="Only runs measured from then on.")
@click.option("--until", metavar="TIME", help="Only runs measured up to then.")
@click.option("--all", "everything", is_flag=True, help="Every row of every list, not the first 20.")
@click.option("--to", "target", type=click.Path(path_type=Path), help="Write a page to print: .html.")
@json_option
@click.pass_context
def audit(
    ctx: click.Context,
    since: str | None,
    until: str | None,
    everything: bool,
    target: Path | None,
    as_json: bool,
) -> int:
    """Runs without review, expired lots, overrides, rejections, exclusions, signals, late entries, the chain."""
    from calib.bench.audit import audit as make_audit
    from calib.cli.screen import print_table, progress_bar, say
    from calib.report.audit_report import check_in_words, period_in_words, render_audit

    with opened(ctx) as store, progress_bar("checking rows") as progress:
        found = make_audit(
            store, since=moment(since, "--since"), until=moment(until, "--until"), progress=progress
        )
    if target is not None:
        from calib.report.files import write_page

        write_page(render_audit(found), target)
    code = 0 if found.check.sound else DAMAGED
    if as_json:
        from calib.report.as_json import plain

        echo_json({"schema": "calib-audit-1", **plain(found)})
        return code
    say(f"audit lists of {period_in_words(found)}", "bold")
    for each in found.lists:
        say()
        say(f"{each.title}: {len(each.rows) or 'none'}", "bold" if each.rows and not each.calm else None)
        shown = each.rows if everything else each.rows[:AT_MOST]
        if shown:
            print_table(each.headings, [tuple("" if c is None else str(c) for c in row) for row in shown])
        if len(shown) < len(each.rows):
            say(f"  … {len(each.rows) - len(shown)} more (--all)")
    say()
    say(check_in_words(found))
    if target is not None:
        say(f"page written to {target}")
    return code
