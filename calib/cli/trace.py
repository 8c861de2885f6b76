"""calib trace: back from a result, forward from a lot, instrument, curve, layout, method or file."""

from __future__ import annotations

from collections.abc import Iterable
from pathlib import Path
from typing import TYPE_CHECKING

import click

from calib.cli.options import echo_json, json_option, opened

if TYPE_CHECKING:
    from calib.bench.trace_forward import Affected, AffectedQuantity
    from calib.bench.trace_records import Trace

LONGEST = 90


@click.command()
@click.argument("kind")
@click.argument("name")
@click.option("--run", "run_number", type=int, help="The run, where a sample was measured in several.")
@click.option(
    "--to", "target", type=click.Path(path_type=Path), help="Draw it too: a file ending in .svg or .png."
)
@json_option
@click.pass_context
def trace(
    ctx: click.Context, kind: str, name: str, run_number: int | None, target: Path | None, as_json: bool
) -> None:
    """Trace KIND NAME: back from a 'result' (a sample, or #number), or forward from anything else.

    Forward: lot, instrument, curve, layout, method, file or run, to every result that rests on it.
    """
    if kind == "result":
        _back(ctx, name, run_number, target, as_json)
    else:
        _forward(ctx, kind, name, target, as_json)


def _back(ctx: click.Context, name: str, run: int | None, target: Path | None, as_json: bool) -> None:
    from calib.bench.trace_back import trace_back

    with opened(ctx) as store:
        found = trace_back(store, name, run=run)
    if target is not None:
        from calib.report.figures import trace_figure
        from calib.report.files import write_figure

        write_figure(trace_figure(found), target)
    if as_json:
        from calib.report.as_json import plain

        echo_json({"schema": "calib-trace-1", **plain(found)})
        return
    _show_back(found)
    _say_written(target)


def _show_back(found: Trace) -> None:
    from calib.cli.screen import print_table, say

    say(f"{found.start}: what it rests on", "bold")
    leads = {t.key: [s.target for s in found.steps if s.source == t.key] for t in found.things}
    print_table(
        ("What", ">Entry", "Recorded", "Leads to"),
        [
            (
                (t.title, f"(superseded by {t.superseded_by})") if t.superseded_by else t.title,
                str(t.entry or "–"),
                tuple(f"{name}: {_short(value)}" for name, value in t.facts),
                tuple(leads[t.key]),
            )
            for t in found.things
        ],
    )
    say(f"record chain at entry {found.chain_sequence}: {found.chain_head}")


def _forward(ctx: click.Context, kind: str, name: str, target: Path | None, as_json: bool) -> None:
    from calib.bench.trace_forward import trace_forward

    with opened(ctx) as store:
        found = trace_forward(store, kind, name)
    if target is not None:
        from calib.report.figures import affected_figure
        from calib.report.files import write_figure

        write_figure(affected_figure(found), target)
    if as_json:
        from calib.report.as_json import plain

        echo_json({"schema": "calib-affected-1", **plain(found)})
        return
    _show_forward(found)
    _say_written(target)


def _show_forward(found: Affected) -> None:
    from calib.cli.screen import say

    show_affected(found.quantities)
    for other in found.others:
        say(f"  by way of {other}")
    say(
        f"{found.start}: {len(found.runs)} runs, {len(found.curves)} curves, "
        f"{len(found.quantities)} results, {len(found.reports)} issued reports"
    )
    say(f"record chain at entry {found.chain_sequence}: {found.chain_head}")


def show_affected(quantities: Iterable[AffectedQuantity]) -> None:
    """Results as they stand now, with what superseded them."""
    from calib.cli.screen import print_table
    from calib.report.wording import number

    print_table(
        ("Measured", ">Run", "Instrument", "Sample", ">Result", ">Curve", "State", "Reports"),
        [
            (
                f"{q.measured:%Y-%m-%d %H:%M}",
                str(q.run),
                q.instrument,
                q.sample if q.role == "unknown" else f"{q.sample} ({q.role})",
                "none" if q.concentration is None else f"{number(q.concentration)} {q.unit}",
                str(q.curve),
                _state(q),
                ", ".join(map(str, q.reports)),
            )
            for q in quantities
        ],
    )


def _state(q: AffectedQuantity) -> str:
    if q.superseded_by is not None:
        return f"superseded by result #{q.superseded_by}"
    if q.withdrawn:
        return "withdrawn"
    return "void" if q.void else q.review


def _short(text: str) -> str:
    return text if len(text) <= LONGEST else f"{text[: LONGEST - 1]}…"


def _say_written(target: Path | None) -> None:
    if target is not None:
        from calib.cli.screen import say

        say(f"picture written to {target}")
