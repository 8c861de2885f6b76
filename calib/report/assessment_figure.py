"""The picture of an assessment: the precision profile with the ends of the working range."""

from __future__ import annotations

from textwrap import wrap
from typing import TYPE_CHECKING

import numpy as np

from calib.report.assessment_rows import heading, recommendation
from calib.report.drawing import (
    ALARM,
    CHECK,
    CURVE,
    FAINT,
    INK,
    NORMAL,
    SMALL,
    logarithmic_x,
    new_figure,
    tidy,
)
from calib.report.wording import in_brackets, percent

if TYPE_CHECKING:
    from matplotlib.figure import Figure

    from calib.bench.assess import Assessment

# The axis reaches so many times the requirement; a profile beyond it leaves the picture.
TALLEST = 2.5
LINE = 125


def assessment_figure(a: Assessment) -> Figure:
    """Draw the precision profile of a method.

    Returns
    -------
    matplotlib.figure.Figure
        Drawn without a screen; see `calib.report.files.write_figure`.
    """
    advice = [line for text in recommendation(a) for line in wrap(text, LINE)]
    below = 0.55 + 0.155 * len(advice)
    height = 4.0 + below
    figure = new_figure(7.6, height)
    axes = figure.add_axes((0.09, below / height, 0.88, 3.0 / height))
    tidy(axes)
    logarithmic_x(axes)
    cv = 100 * a.profile
    axes.plot(a.concentration, cv, color=CURVE, linewidth=1.5, label="coefficient of variation")
    axes.axhline(100 * a.cv, color=INK, linewidth=0.9, linestyle="--", label=f"required: {percent(a.cv, 0)}")
    if a.working[0] is not None and a.working[1] is not None:
        axes.axvspan(a.working[0], a.working[1], color=CURVE, alpha=0.10, linewidth=0, label="working range")
    for value, name, colour, style in (
        (a.critical, "critical value", CHECK, ":"),
        (a.detectable, "detection capability", ALARM, "-."),
    ):
        if value is not None and value > 0:
            axes.axvline(value, color=colour, linestyle=style, linewidth=1.1, label=name)
    tallest = max(float(np.nanmax(cv)), 100 * a.cv)
    axes.set_ylim(0, min(1.35 * tallest, 100 * TALLEST * a.cv))
    axes.set_xlabel(in_brackets("concentration", a.concentration_unit), fontsize=NORMAL, color=INK)
    axes.set_ylabel("CV of an unknown [%]", fontsize=NORMAL, color=INK)
    axes.legend(fontsize=SMALL, frameon=False, loc="upper center", ncols=3)
    first, second = heading(a)
    figure.text(0.02, 1 - 0.10 / height, first, fontsize=NORMAL, color=INK, weight="bold", va="top")
    figure.text(0.02, 1 - 0.32 / height, "\n".join(wrap(second, LINE)), fontsize=SMALL, color=FAINT, va="top")
    figure.text(
        0.02, 0.08 / height, "\n".join(advice), fontsize=SMALL, color=INK, va="bottom", linespacing=1.3
    )
    return figure
