"""The picture of a proof: coverage over the range, intervals without two ends, and what the criteria notice."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from calib.report.drawing import (
    ALARM,
    CHECK,
    CURVE,
    FAINT,
    INK,
    NORMAL,
    RULE,
    SMALL,
    UNKNOWN,
    new_figure,
    tidy,
)
from calib.report.proof_rows import SHORT, heading
from calib.report.wording import in_brackets, percent

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from calib.bench.proof_records import Proof, ProvenCell, Share

MARKS = ((CURVE, "o", "-"), (CHECK, "s", "--"), (UNKNOWN, "^", ":"))
# Replicates beside each other, so that their error bars can be told apart.
BESIDE = 0.11
LONGEST_NAME = 34


def proof_figure(proof: Proof) -> Figure:
    """Draw a proof.

    Returns
    -------
    matplotlib.figure.Figure
        Drawn without a screen; see `calib.report.files.write_figure`.
    """
    rows = len(_table(proof))
    table_height = 0.55 + 0.19 * rows
    height = 4.2 + table_height
    figure = new_figure(8.6, height)
    grid = figure.add_gridspec(
        2,
        1,
        height_ratios=(2.1, 1.0),
        left=0.09,
        right=0.98,
        top=1 - 0.72 / height,
        bottom=(table_height + 0.55) / height,
        hspace=0.16,
    )
    above = figure.add_subplot(grid[0])
    below = figure.add_subplot(grid[1], sharex=above)
    _draw_coverage(above, proof)
    _draw_without_value(below, proof)
    table = figure.add_axes((0.02, 0.05 / height, 0.96, table_height / height))
    _draw_table(table, proof)
    _head(figure, proof, height)
    return figure


def _by_replicates(proof: Proof) -> list[list[ProvenCell]]:
    numbers = sorted({c.replicates for c in proof.cells})
    return [[c for c in proof.cells if c.replicates == n] for n in numbers]


def _draw_coverage(axes: Axes, proof: Proof) -> None:
    tidy(axes)
    axes.tick_params(labelbottom=False)
    groups = _by_replicates(proof)
    lowest = 100 * proof.confidence - 8.0
    for group, (colour, marker, style), shift in zip(groups, MARKS, (-BESIDE, 0.0, BESIDE), strict=True):
        x = np.arange(len(group)) + shift
        values = np.array([np.nan if c.covered.value is None else 100 * c.covered.value for c in group])
        ends = np.array([c.covered.interval or (np.nan, np.nan) for c in group]) * 100
        if np.any(np.isfinite(values)):
            lowest = min(lowest, float(np.nanmin(ends)) - 1.0)
        n = group[0].replicates
        axes.errorbar(
            x,
            values,
            yerr=np.abs(ends.T - values),
            color=colour,
            marker=marker,
            linestyle=style,
            linewidth=0.9,
            markersize=4.5,
            elinewidth=0.9,
            capsize=2,
            label=f"{n} reading{'' if n == 1 else 's'} of the unknown",
        )
    claimed = f"claimed {percent(proof.confidence, 0)}"
    axes.axhline(100 * proof.confidence, color=INK, linewidth=1.0, zorder=0, label=claimed)
    axes.set_ylim(max(lowest, 0.0), 100.4)
    axes.set_ylabel("intervals that cover [%]", fontsize=NORMAL, color=INK)
    axes.legend(fontsize=SMALL, frameon=False, loc="lower left", ncols=4)


def _draw_without_value(axes: Axes, proof: Proof) -> None:
    tidy(axes)
    for group, (colour, marker, style), shift in zip(
        _by_replicates(proof), MARKS, (-BESIDE, 0.0, BESIDE), strict=True
    ):
        x = np.arange(len(group)) + shift
        missing = [100 * (c.missing.value or 0.0) for c in group]
        opened = [100 * (c.open.value or 0.0) for c in group]
        axes.plot(x, missing, color=colour, marker=marker, linestyle=style, linewidth=0.9, markersize=4)
        axes.scatter(x, opened, facecolors="none", edgecolors=colour, marker=marker, s=34, linewidths=0.9)
    axes.set_ylim(-4, 104)
    axes.set_ylabel("share [%]", fontsize=NORMAL, color=INK)
    axes.text(
        0.5,
        0.93,
        "filled: no value reported   hollow: interval with an open end",
        transform=axes.transAxes,
        ha="center",
        va="top",
        fontsize=SMALL,
        color=INK,
    )
    first = _by_replicates(proof)[0]
    axes.set_xticks(range(len(first)), [f"{c.concentration:.3g}" for c in first])
    axes.set_xlim(-0.4, len(first) - 0.6)
    axes.set_xlabel(in_brackets("true concentration", proof.concentration_unit), fontsize=NORMAL, color=INK)


def _table(proof: Proof) -> list[tuple[str, list[Share | None]]]:
    """Rows of shares: verdict, criteria that were ever not kept, coverage of accepted runs."""
    rows: list[tuple[str, list[Share | None]]] = [
        ("run rejected", [s.rejected for s in proof.scenarios]),
    ]
    for criterion in proof.criteria:
        shares = [s.fired.get(criterion.key) for s in proof.scenarios]
        if any(share is not None and share.count for share in shares):
            rows.append((f"{criterion.key}{' (warns)' if criterion.warns else ''}", shares))
    return [*rows, ("intervals of accepted runs cover", [s.covered for s in proof.scenarios])]


def _draw_table(axes: Axes, proof: Proof) -> None:
    """Shares as figures on a shade: the darker, the more often."""
    rows = _table(proof)
    axes.set_xlim(-2.2, len(proof.scenarios))
    axes.set_ylim(len(rows), -1.0)
    axes.axis("off")
    axes.text(-2.2, -0.5, "in how many runs", fontsize=SMALL, color=INK, va="center", weight="bold")
    for column, scenario in enumerate(proof.scenarios):
        axes.text(
            column + 0.5, -0.5, SHORT[scenario.key], fontsize=SMALL, color=INK, ha="center", va="center"
        )
    for row, (name, shares) in enumerate(rows):
        shown = name if len(name) <= LONGEST_NAME else f"{name[: LONGEST_NAME - 1]}…"
        axes.text(-2.2, row + 0.5, shown, fontsize=SMALL, color=INK, va="center")
        last = row == len(rows) - 1
        for column, share in enumerate(shares):
            _draw_share(axes, column, row, share, RULE if last else ALARM)


def _draw_share(axes: Axes, column: int, row: int, share: Share | None, colour: str) -> None:
    from matplotlib.patches import Rectangle

    value = None if share is None else share.value
    shade = 0.0 if value is None else 0.75 * value
    axes.add_patch(
        Rectangle(
            (column + 0.03, row + 0.06), 0.94, 0.88, facecolor=colour, alpha=max(shade, 0.02), linewidth=0
        )
    )
    text = "–" if value is None else "0" if share is not None and share.count == 0 else percent(value)
    axes.text(column + 0.5, row + 0.5, text, fontsize=SMALL, color=INK, ha="center", va="center")


def _head(figure: Figure, proof: Proof, height: float) -> None:
    first, *rest = heading(proof)
    figure.text(0.02, 1 - 0.10 / height, first, fontsize=NORMAL, color=INK, weight="bold", va="top")
    figure.text(
        0.02, 1 - 0.30 / height, "\n".join(rest), fontsize=SMALL - 0.5, color=FAINT, va="top", linespacing=1.4
    )
