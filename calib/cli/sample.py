"""calib sample: what can be released, what waits, and why."""

from __future__ import annotations

from datetime import date
from typing import TYPE_CHECKING

import click

from calib.cli.options import echo_json, json_option, opened
from calib.errors import InputError

if TYPE_CHECKING:
    from calib.bench.sample_desk import SampleRecord

SAMPLE_STATES = ("release", "review", "dilute", "re-run")


@click.group()
def sample() -> None:
    """What can be released now, what waits for dilution, another run or review, and why."""


@sample.command("list")
@click.option("--instrument", metavar="NAME", help="Only this instrument.")
@click.option("--method", metavar="NAME", help="Only this method.")
@click.option("--since", metavar="DAY", help="Last measured on this day or later; else the last day.")
@click.option("--state", type=click.Choice(SAMPLE_STATES), help="Only samples in this state.")
@json_option
@click.pass_context
def list_(
    ctx: click.Context,
    instrument: str | None,
    method: str | None,
    since: str | None,
    state: str | None,
    as_json: bool,
) -> None:
    """Samples, those that need work first."""
    from calib.bench.sample_desk import list_samples

    day = _day(since)
    with opened(ctx) as store:
        records = list_samples(store, instrument=instrument, method=method, since=day, state=state)
    if as_json:
        _echo(records)
        return
    from calib.cli.sample_screen import show_list

    show_list(records)


@sample.command()
@click.argument("name")
@click.option("--method", metavar="NAME", help="Only this method.")
@json_option
@click.pass_context
def show(ctx: click.Context, name: str, method: str | None, as_json: bool) -> None:
    """Sample NAME at every dilution and in every run, and which value counts."""
    from calib.bench.sample_desk import show_sample

    with opened(ctx) as store:
        records = show_sample(store, name, method)
    if as_json:
        _echo(records)
        return
    from calib.cli.sample_screen import show_one

    for record in records:
        show_one(record)


def _echo(records: tuple[SampleRecord, ...]) -> None:
    from calib.report.sample_json import samples_json

    echo_json(samples_json(records))


def _day(text: str | None) -> date | None:
    if text is None:
        return None
    try:
        return date.fromisoformat(text)
    except ValueError as cause:
        raise InputError(f"--since {text!r} is no day; write 2026-03-02") from cause
