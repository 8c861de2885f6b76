"""calib rules: why a run has its verdict."""

from __future__ import annotations

import click

from calib.cli.options import echo_json, json_option, opened


@click.command()
@click.argument("number", metavar="RUN", type=int)
@json_option
@click.pass_context
def rules(ctx: click.Context, number: int, as_json: bool) -> None:
    """Why RUN has this verdict: each rule, what was seen, its source, and what would have to change."""
    from calib.bench.control_history import control_history
    from calib.bench.show_run import show_run

    with opened(ctx) as store:
        record = show_run(store, number)
        history = control_history(store, number)
    if as_json:
        from calib.report.as_json import rules_json

        echo_json(rules_json(record, history))
        return
    from calib.cli.rules_screen import show_control_history, show_rules

    show_rules(record)
    show_control_history(history)
