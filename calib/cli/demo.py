"""calib demo."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from calib.cli.options import echo_json, json_option
from calib.errors import InputError

if TYPE_CHECKING:
    from calib.bench.records import RunRecord
    from calib.bench.set_up_demo import DemoSeason

STORE_NAME = "laboratory.db"
REPORT_NAME = "today.html"


@click.command()
@click.option(
    "--into", type=click.Path(path_type=Path), default=Path("demo-lab"), help="Folder to set it up in."
)
@json_option
def demo(into: Path, as_json: bool) -> None:
    """Set up the fictional laboratory, log its season, show today, and write the report.

    An interrupted demo goes on where it stopped.
    """
    from calib.bench.keep_store import open_laboratory_store
    from calib.bench.review_drift import review_instrument, reviewed_pairs
    from calib.bench.set_up_demo import set_up_demo
    from calib.bench.show_run import show_run
    from calib.cli.screen import progress_bar
    from calib.report.figures import drift_figure
    from calib.report.files import write_figure, write_report

    path = _folder(into) / STORE_NAME
    with open_laboratory_store(path, create=True) as store:
        with progress_bar("logging the season") as progress:
            season = set_up_demo(store, progress)
        today = [show_run(store, n) for n in season.today]
        reviews = [review_instrument(store, i, m) for i, m in reviewed_pairs(store)]
    shown = max(today, key=lambda r: len(r.evaluation.quantities))
    write_report(shown, into / REPORT_NAME)
    for review in reviews:
        write_figure(drift_figure(review), into / f"drift_{review.instrument}.png")
    if as_json:
        echo_json(_json(into, season, today, reviews))
        return
    _show(into, season, today, shown, reviews)


def _folder(into: Path) -> Path:
    """The folder, made if missing; one with other things in it is left alone."""
    try:
        into.mkdir(parents=True, exist_ok=True)
        # A hidden draft is what a demo killed at its very start leaves behind.
        foreign = any(not f.name.startswith(".") for f in into.iterdir()) and not (into / STORE_NAME).exists()
    except OSError as cause:
        raise InputError(
            f"{into}: no usable folder ({cause.strerror}); choose another with --into"
        ) from cause
    if foreign:
        raise InputError(f"{into} holds other files; choose an empty folder with --into")
    return into


def _shortened(text: str, most: int = 100) -> str:
    return text if len(text) <= most else text[: most - 1].rstrip(" ,;:") + "…"


def _json(into: Path, season: DemoSeason, today: list[RunRecord], reviews: list[Any]) -> dict[str, Any]:
    from calib.report.as_json import plain, run_json
    from calib.report.history_json import drift_json

    return {
        "schema": "calib-demo-1",
        "store": str(into / STORE_NAME),
        "report": str(into / REPORT_NAME),
        "season": plain(season),
        "today": [run_json(r) for r in today],
        "drift": [drift_json(r) for r in reviews],
    }


def _show(
    into: Path, season: DemoSeason, today: list[RunRecord], shown: RunRecord, reviews: list[Any]
) -> None:
    from calib.cli.drift_screen import show_reviews
    from calib.cli.run_screen import show_run, show_verdict
    from calib.cli.screen import say

    say(f"{season.laboratory} (fictional): {season.logged} files logged, {season.present} there before")
    for _, message in season.refused:
        say(f"  refused   {message.partition('; ')[0]}")
    for file, reason in season.rejected:
        say(f"  rejected  {file}: {_shortened(reason)}")
    for file, decision in season.corrected:
        say(f"  corrected {file}: {decision} after a person's exclusion with its cause")
    say()
    say("Today", "bold")
    for record in today:
        if record is not shown:
            show_verdict(record)
    show_run(shown)
    say()
    say("Drift over the season", "bold")
    show_reviews(reviews)
    say()
    say(f"Report: {into / REPORT_NAME}   pictures: {into / 'drift_PP-2.png'} and three more")
    say("Try next:")
    for command in (
        f"run show {shown.heading.id} --rules",
        "drift EE-3 --last 20",
        "store check",
    ):
        say(f"  calib --store {into / STORE_NAME} {command}")
    say("Invented data. Limits of the presets are aids; your validated method and local rules govern.")
