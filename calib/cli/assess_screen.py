"""The assessment of a method on the screen."""

from __future__ import annotations

from calib.bench.assess import Assessment
from calib.cli.screen import print_table, say
from calib.report.assessment_rows import (
    CAUTION,
    COMPARISON_HEADINGS,
    comparison_rows,
    heading,
    range_rows,
    recommendation,
)


def show_assessment(assessment: Assessment) -> None:
    """Recommendation first, then the figures behind it."""
    first, second = heading(assessment)
    say(first, "bold")
    for line in recommendation(assessment):
        say(f"  {line}")
    say(f"  {second}")
    if assessment.comparisons:
        print_table(COMPARISON_HEADINGS, comparison_rows(assessment))
    print_table(("Range and limits", ">Found"), range_rows(assessment))
    say(CAUTION)
