"""calib history: everything that happened to one record."""

from __future__ import annotations

from typing import TYPE_CHECKING

import click

from calib.cli.options import echo_json, json_option, opened

if TYPE_CHECKING:
    from calib.bench.record_history import HistoryStep

LONGEST = 60


@click.command()
@click.argument("kind")
@click.argument("record")
@json_option
@click.pass_context
def history(ctx: click.Context, kind: str, record: str, as_json: bool) -> None:
    """Everything that happened to a record: KIND (run, lot, method, person, …) and its number or name."""
    from calib.bench.record_history import history_of_record

    with opened(ctx) as store:
        steps = history_of_record(store, kind, record)
    if as_json:
        from calib.report.as_json import listing_json

        echo_json(listing_json("calib-history-1", "entries", steps))
        return
    from calib.cli.screen import print_table

    print_table(
        (">Entry", "When", "By", "What", "Reason", "Rows"),
        [
            (
                str(step.sequence or "–"),
                f"{step.at:%Y-%m-%d %H:%M:%S %z}" if step.at else "",
                step.by,
                step.action,
                step.reason or "",
                tuple(_rows_in_words(step)),
            )
            for step in steps
        ],
    )


def _rows_in_words(step: HistoryStep) -> list[str]:
    """New rows counted, versions with what changed."""
    fresh: dict[str, int] = {}
    lines = []
    for row in step.rows:
        if row.supersedes is None:
            fresh[row.table] = fresh.get(row.table, 0) + 1
            continue
        changes = ", ".join(f"{c} {_short(old)} → {_short(new)}" for c, old, new in row.changes)
        lines.append(f"{row.table} {row.id} over {row.supersedes}: {changes or 'no value changed'}")
    counted = ", ".join(f"{n} {table}" for table, n in fresh.items())
    return [f"new: {counted}", *lines] if counted else lines


def _short(value: object) -> str:
    text = "nothing" if value is None else str(value)
    return text if len(text) <= LONGEST else f"{text[: LONGEST - 1]}…"
