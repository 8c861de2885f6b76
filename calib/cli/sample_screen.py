"""The samples desk on the screen: what needs work first, and no value that is not released without DRAFT."""

from __future__ import annotations

from collections import Counter
from collections.abc import Sequence
from typing import TYPE_CHECKING

from calib.bench.sample_desk import IN_WORDS, STATES
from calib.cli.screen import print_table, say
from calib.report.sample_wording import counting_text, sample_result_text, statement_text
from calib.report.wording import number

if TYPE_CHECKING:
    from calib.bench.sample_desk import SampleRecord


def show_list(records: Sequence[SampleRecord]) -> None:
    """One line a sample, after how many are in which state."""
    if not records:
        say("no samples")
        return
    counts = Counter(record.state for record in records)
    say("; ".join(f"{IN_WORDS[state]}: {counts[state]}" for state in STATES if counts[state]), "bold")
    print_table(
        ("Sample", "Method", "Measured", "State", "Result", "Why"),
        [
            (
                record.sample,
                record.method,
                f"{record.latest:%Y-%m-%d %H:%M}",
                IN_WORDS[record.state],
                counting_text(record),
                record.why,
            )
            for record in records
        ],
    )


def show_one(record: SampleRecord) -> None:
    """All results of a sample, which of them counts, and what it waits for."""
    say(f"{record.sample} · {record.method}: {IN_WORDS[record.state]}", "bold")
    say(f"  {record.why}")
    print_table(
        (">Run", "Measured", "Instrument", ">Dilution", ">Result", "Counts", "Flags"),
        [
            (
                str(result.run),
                f"{result.at:%Y-%m-%d %H:%M}",
                result.instrument,
                f"× {number(result.quantity.dilution)}",
                sample_result_text(result),
                "yes" if result in record.counts else "void" if result.void else "",
                "; ".join(result.quantity.flags),
            )
            for result in record.results
        ],
    )
    for line in statement_text(record):
        say(f"  {line}")
