"""calib prove."""

from __future__ import annotations

from pathlib import Path

import click

from calib.cli.options import echo_json, json_option, opened


@click.command()
@click.argument("method")
@click.option("--instrument", metavar="NAME", help="Needed where several instruments have runs of METHOD.")
@click.option(
    "--runs",
    type=click.IntRange(20, 1_000_000),
    help="Clean runs to simulate (1000); a quarter with each fault.",
)
@click.option(
    "--seed", type=click.IntRange(min=0), help="Of the simulation; the same gives the same figures."
)
@click.option("--to", "target", type=click.Path(path_type=Path), help="Picture too, to FILE.svg or .png.")
@json_option
@click.pass_context
def prove(
    ctx: click.Context,
    method: str,
    instrument: str | None,
    runs: int | None,
    seed: int | None,
    target: Path | None,
    as_json: bool,
) -> None:
    """Simulate METHOD as it is: how often its intervals cover, and what its rules notice.

    Nothing is written to the store.
    """
    from calib.bench.prove import FIRST_SEED, RUNS, prove_method
    from calib.cli.screen import progress_bar
    from calib.report.files import check_picture, write_figure

    if target is not None:
        check_picture(target)  # before a minute of work
    with opened(ctx) as store, progress_bar("prove") as progress:
        proof = prove_method(
            store,
            method,
            instrument,
            runs=RUNS if runs is None else runs,
            seed=FIRST_SEED if seed is None else seed,
            progress=progress,
        )
    if target is not None:
        from calib.report.figures import proof_figure

        write_figure(proof_figure(proof), target)
    if as_json:
        from calib.report.proof_json import proof_json

        echo_json(proof_json(proof))
        return
    from calib.cli.prove_screen import show_proof

    show_proof(proof)
    if target is not None:
        click.echo(f"picture written to {target}")
