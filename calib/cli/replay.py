"""calib replay."""

from __future__ import annotations

from pathlib import Path

import click

from calib.cli.options import echo_json, json_option, opened


@click.command()
@click.argument("method", required=False)
@click.option("--version", type=click.IntRange(min=1), help="Under this version of METHOD, not the latest.")
@click.option(
    "--with", "file", type=click.Path(path_type=Path), help="Under this FILE.toml, which need not be added."
)
@click.option("--instrument", metavar="NAME", help="Only runs of this instrument.")
@click.option("--run", "runs", type=int, multiple=True, help="Only this run; may be given several times.")
@json_option
@click.pass_context
def replay(
    ctx: click.Context,
    method: str | None,
    version: int | None,
    file: Path | None,
    instrument: str | None,
    runs: tuple[int, ...],
    as_json: bool,
) -> None:
    """Evaluate runs of METHOD (or all) again under another version: what would have changed.

    Nothing is written, and the exit code is 0 also when verdicts would change.
    """
    from calib.bench.replay import ReplayRequest, replay_runs
    from calib.cli.screen import progress_bar

    request = ReplayRequest(method=method, instrument=instrument, runs=runs, version=version, file=file)
    with opened(ctx) as store, progress_bar("replay") as progress:
        record = replay_runs(store, request, progress)
    if as_json:
        from calib.report.history_json import replay_json

        echo_json(replay_json(record))
        return
    from calib.cli.replay_screen import show_replay

    show_replay(record)
