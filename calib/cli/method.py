"""calib method."""

from __future__ import annotations

from pathlib import Path

import click

from calib.cli.options import acting, by_option, echo_json, json_option, opened

SCHEMA = "calib-methods-1"
DETECTION = "calib-detection-1"


@click.group()
def method() -> None:
    """Add and show method definitions. A new version never changes what old runs were judged by."""


@method.command()
@click.argument("file", type=click.Path(path_type=Path))
@by_option
@click.pass_context
def add(ctx: click.Context, file: Path, by: str | None) -> None:
    """Add the method FILE.toml, as its first or next version."""
    from calib.bench.register import add_method

    with opened(ctx, create=True) as store:
        record = add_method(store, file, by=acting(by))
    click.echo(f"method {record.name} version {record.version} added")


@method.command("list")
@json_option
@click.pass_context
def list_(ctx: click.Context, as_json: bool) -> None:
    """Every version of every method."""
    from calib.bench.register import list_methods

    with opened(ctx) as store:
        records = list_methods(store)
    if as_json:
        from calib.report.as_json import method_json

        echo_json({"schema": SCHEMA, "methods": [method_json(r) for r in records]})
        return
    from calib.cli.screen import print_table

    print_table(
        ("Method", ">Version", "Analyte", "Model", "Added", "By"),
        [
            (
                r.name,
                str(r.version),
                f"{r.definition.analyte} [{r.definition.concentration_unit}]",
                r.definition.model,
                f"{r.added_at:%Y-%m-%d}",
                r.added_by,
            )
            for r in records
        ],
    )


@method.command()
@click.argument("name")
@click.option("--version", type=click.IntRange(min=1), help="This version, not the latest.")
@json_option
@click.pass_context
def show(ctx: click.Context, name: str, version: int | None, as_json: bool) -> None:
    """Method NAME with every limit, where it comes from and how far it was checked."""
    from calib.bench.register import show_method

    with opened(ctx) as store:
        record = show_method(store, name, version)
    if as_json:
        from calib.report.as_json import method_json

        echo_json({"schema": SCHEMA, "methods": [method_json(record)]})
        return
    from calib.cli.screen import print_table, say
    from calib.report.limit_wording import limit_text, settings_in_words
    from calib.report.wording import number

    definition = record.definition
    say(
        f"{record.name} version {record.version}: {definition.analyte} [{definition.concentration_unit}]",
        "bold",
    )
    say(
        f"  model {definition.model}, preset {definition.preset}, "
        f"a curve is valid for {number(definition.valid_hours)} h"
    )
    for line in settings_in_words(definition):
        say(f"  {line}")
    print_table(
        ("Limit", ">Value", "Source", "Checked"),
        [
            (key, limit_text(key, v, definition.concentration_unit), v.source, v.checked)
            for key, v in definition.limits.items()
        ],
    )


@method.command()
@click.argument("name")
@click.option("--instrument", required=True, metavar="NAME", help="The instrument it runs on.")
@click.option("--spikes", metavar="BEGINNING", help="How the names of the spiked samples begin.")
@click.option(
    "--replicates", type=click.IntRange(min=1), default=1, show_default=True, help="Readings a sample."
)
@click.option(
    "--runs", type=click.IntRange(min=1), default=20, show_default=True, help="Latest accepted runs."
)
@json_option
@click.pass_context
def detection(
    ctx: click.Context,
    name: str,
    instrument: str,
    spikes: str | None,
    replicates: int,
    runs: int,
    as_json: bool,
) -> None:
    """Decision, detection and quantification limits of method NAME, by named procedures."""
    from calib.bench.detection_limits import detection_limits

    with opened(ctx) as store:
        record = detection_limits(store, instrument, name, spikes=spikes, replicates=replicates, runs=runs)
    if as_json:
        from calib.report.as_json import plain

        echo_json({"schema": DETECTION, **plain(record)})
        return
    from calib.cli.detection_screen import show_detection

    show_detection(record)


@method.command()
@click.argument("name")
@click.option(
    "--instrument", metavar="NAME", help="Needed where several instruments have runs of the method."
)
@click.option("--cv", type=float, help="Required coefficient of variation, such as 0.2; else the method's.")
@click.option("--replicates", type=int, help="Readings of an unknown; else as in the last accepted run.")
@click.option("--to", "target", type=click.Path(path_type=Path), help="Picture too, to FILE.svg or .png.")
@json_option
@click.pass_context
def assess(
    ctx: click.Context,
    name: str,
    instrument: str | None,
    cv: float | None,
    replicates: int | None,
    target: Path | None,
    as_json: bool,
) -> None:
    """Model and range of method NAME, judged by its accepted runs; nothing is written to the store."""
    from calib.bench.assess import assess_method
    from calib.report.files import check_picture, write_figure

    if target is not None:
        check_picture(target)
    with opened(ctx) as store:
        found = assess_method(store, name, instrument, cv=cv, replicates=replicates)
    if target is not None:
        from calib.report.figures import assessment_figure

        write_figure(assessment_figure(found), target)
    if as_json:
        from calib.report.assessment_json import assessment_json

        echo_json(assessment_json(found))
        return
    from calib.cli.assess_screen import show_assessment

    show_assessment(found)
    if target is not None:
        click.echo(f"picture written to {target}")
