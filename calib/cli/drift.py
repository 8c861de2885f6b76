"""calib drift."""

from __future__ import annotations

from pathlib import Path

import click

from calib.cli.options import echo_json, json_option, moment, opened


@click.command()
@click.argument("instrument", required=False)
@click.option("--method", metavar="NAME", help="Method, where the instrument runs several.")
@click.option("--since", metavar="TIME", help="Declared restart: limits rest on accepted runs from here on.")
@click.option("--last", type=click.IntRange(min=1), default=15, show_default=True, help="Runs in the table.")
@click.option("--to", "target", type=click.Path(path_type=Path), help="Draw the picture: .svg or .png.")
@json_option
@click.pass_context
def drift(
    ctx: click.Context,
    instrument: str | None,
    method: str | None,
    since: str | None,
    last: int,
    target: Path | None,
    as_json: bool,
) -> None:
    """Review INSTRUMENT over time, or all instruments in one line each."""
    from calib.bench.review_drift import review_instrument, reviewed_pairs

    with opened(ctx) as store:
        pairs = _chosen(reviewed_pairs(store), method) if instrument is None else ((instrument, method),)
        records = [review_instrument(store, i, m, since=moment(since, "--since")) for i, m in pairs]
    if target is not None:
        _draw(records, target)
    if as_json:
        from calib.report.history_json import drift_json

        echo_json({"schema": "calib-drift-list-1", "reviews": [drift_json(r) for r in records]})
        return
    from calib.cli.drift_screen import show_review, show_reviews

    if instrument is None:
        show_reviews(records)
    else:
        show_review(records[0], last)
    if target is not None:
        click.echo(f"picture written to {target}")


def _chosen(pairs: tuple[tuple[str, str], ...], method: str | None) -> tuple[tuple[str, str | None], ...]:
    return tuple((i, m) for i, m in pairs if method is None or m == method)


def _draw(records: list, target: Path) -> None:  # type: ignore[type-arg]
    from calib.errors import InputError
    from calib.report.figures import drift_figure
    from calib.report.files import write_figure

    if len(records) != 1:
        raise InputError("--to draws one instrument; name it")
    write_figure(drift_figure(records[0]), target)
