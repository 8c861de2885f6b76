"""The picture of one run: standards, curve and band above, relative errors below."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise
from typing import TYPE_CHECKING, Any, Literal

import numpy as np

from calib.report.drawing import (
    ALARM,
    CHECK,
    CURVE,
    FAINT,
    INK,
    NORMAL,
    SMALL,
    UNKNOWN,
    logarithmic_x,
    new_figure,
    tidy,
)
from calib.report.standard_limits import relative_error_limit
from calib.report.wording import in_brackets, number

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from calib.bench.records import RunRecord, StandardRecord

CROSS: dict[str, Any] = {"marker": "x", "color": ALARM, "s": 34, "linewidths": 1.1}
POINTS = 240
# Room beside the outermost standards, as a factor on the logarithmic axis and a share on the plain one.
BESIDE_FACTOR, BESIDE_SHARE = 1.35, 0.04
# The panel of relative errors reaches no further than so many times the widest limit.
FARTHEST = 3.0
HOLLOW: dict[str, Any] = {"facecolors": "none", "linewidths": 1.1}


def curve_figure(record: RunRecord) -> Figure:
    """Draw the curve of a run and the relative errors of its standards.

    Parameters
    ----------
    record : RunRecord

    Returns
    -------
    matplotlib.figure.Figure
        Drawn without a screen; see `calib.report.files.write_figure`.
    """
    figure = new_figure(7.2, 5.6)
    panels = _panels(figure, record)
    _draw_curve(panels, record)
    _draw_standards(panels, record)
    _draw_at_zero(panels, record)
    _draw_others(panels, record)
    _draw_relative_errors(panels.below, record)
    _label(panels, record)
    _set_range(panels, record)
    _head(figure, record)
    return figure


@dataclass(frozen=True, slots=True)
class _Panels:
    """Axes of the picture; ``margin`` holds what lies at concentration 0 of a logarithmic axis."""

    above: Axes
    below: Axes
    margin: Axes | None

    @property
    def response_axes(self) -> Axes:
        """Where the scale of the responses stands."""
        return self.margin or self.above


def _panels(figure: Figure, record: RunRecord) -> _Panels:
    margin_needed = record.evaluation.curve.response_model.logarithmic and bool(_at_zero(record))
    grid = figure.add_gridspec(
        2,
        2,
        height_ratios=(3.2, 1.2),
        width_ratios=(1, 16) if margin_needed else (0.001, 16),
        left=0.1,
        right=0.975,
        bottom=0.085,
        top=0.905,
        hspace=0.1,
        wspace=0.015,
    )
    above = figure.add_subplot(grid[0, 1])
    below = figure.add_subplot(grid[1, 1], sharex=above)
    margin = figure.add_subplot(grid[0, 0], sharey=above) if margin_needed else None
    tidy(above)
    tidy(below)
    above.tick_params(labelbottom=False)
    if record.evaluation.curve.response_model.logarithmic:
        logarithmic_x(above)
    if margin is not None:
        _break_axis(above, margin)
    return _Panels(above, below, margin)


def _break_axis(above: Axes, margin: Axes) -> None:
    """Show that the left margin, at concentration 0, lies off the logarithmic axis."""
    tidy(margin)
    margin.set_xlim(-1, 1)
    margin.set_xticks([0], ["0"])
    margin.tick_params(axis="x", length=0)
    above.spines["left"].set_visible(False)
    above.tick_params(axis="y", left=False, labelleft=False)
    slash: dict[str, Any] = {"color": FAINT, "clip_on": False, "linewidth": 0.9, "markersize": 6}
    for axes, x in ((margin, 1.0), (above, 0.0)):
        axes.plot([x], [0], marker=[(-0.5, -1), (0.5, 1)], transform=axes.transAxes, **slash)


def _draw_curve(panels: _Panels, record: RunRecord) -> None:
    """Curve through the fitted levels; band over the calibrated range only."""
    curve, confidence = record.evaluation.curve, record.definition.interval_confidence
    if not np.all(np.isfinite(curve.values)):
        _say(panels.above, "no curve: the fit gave no parameters", 0.5, 0.5)
        return
    levels = [s.concentration for s in record.evaluation.standards if s.fitted]
    x = _grid(record, levels)
    style = "-" if curve.converged else "--"
    panels.above.plot(x, curve.predict(x), style, color=CURVE, linewidth=1.5, zorder=3, label="curve")
    inside = _grid(record, [s.concentration for s in _judged(record) if s.fitted])
    lower, upper = curve.prediction_band(inside, confidence=confidence)
    if inside.size and np.all(np.isfinite(upper - lower)):
        label = f"{number(100 * confidence)} % prediction band, one reading"
        panels.above.fill_between(
            inside, lower, upper, color=CURVE, alpha=0.16, linewidth=0, zorder=1, label=label
        )


def _grid(record: RunRecord, levels: Sequence[float]) -> np.ndarray[Any, Any]:
    """Concentrations to draw the curve at, evenly along the axis."""
    if record.evaluation.curve.response_model.logarithmic:
        levels = [v for v in levels if v > 0]
        return np.geomspace(min(levels), max(levels), POINTS) if levels else np.empty(0)
    return np.linspace(min(levels), max(levels), POINTS) if levels else np.empty(0)


def _draw_standards(panels: _Panels, record: RunRecord) -> None:
    present = [s for s in _on_axis(record, record.evaluation.standards) if s.response is not None]
    points = [(s, s.concentration, s.response) for s in present if s.response is not None]
    _draw_points(panels.above, points)


def _draw_points(axes: Axes, points: Sequence[tuple[StandardRecord, float, float]]) -> None:
    """Standards in their shapes: anchors, excluded and saturated ones can be told without colour."""
    kinds: dict[str, list[tuple[float, float]]] = {}
    for standard, x, y in points:
        kinds.setdefault(_kind(standard), []).append((x, y))
    styles: dict[str, dict[str, Any]] = {
        "standard": {"marker": "o", "color": INK, "s": 20, "linewidths": 0},
        "anchor standard": {"marker": "D", "edgecolors": INK, "s": 20, **HOLLOW},
        "saturated": {"marker": "s", "edgecolors": ALARM, "s": 34, **HOLLOW},
        "excluded": {"marker": "o", "edgecolors": ALARM, "s": 34, **HOLLOW},
    }
    for kind, style in styles.items():
        if kind in kinds:
            axes.scatter(*np.transpose(kinds[kind]), zorder=4, label=kind, **style)
    crossed = np.reshape([(x, y) for s, x, y in points if s.excluded], (-1, 2))
    axes.scatter(crossed[:, 0], crossed[:, 1], zorder=5, **CROSS)


def _kind(standard: StandardRecord) -> str:
    if standard.saturated:
        return "saturated"
    if standard.excluded:
        return "excluded"
    return "anchor standard" if standard.role == "anchor" else "standard"


def _on_axis(record: RunRecord, standards: Sequence[StandardRecord]) -> list[StandardRecord]:
    plain = not record.evaluation.curve.response_model.logarithmic
    return [s for s in standards if plain or s.concentration > 0]


def _at_zero(record: RunRecord) -> list[float]:
    """Responses of blanks, zero standards, and standards at level 0."""
    evaluation = record.evaluation
    standards = [s.response for s in evaluation.standards if s.concentration == 0]
    blanks = [b.response for b in evaluation.blanks if record.heading.kind == "calibration"]
    return [y for y in (*blanks, *standards) if y is not None]


def _draw_at_zero(panels: _Panels, record: RunRecord) -> None:
    axes, y = panels.margin or panels.above, _at_zero(record)
    axes.scatter([0.0] * len(y), y, marker="d", edgecolors=FAINT, s=26, zorder=4, **HOLLOW)
    if y:  # named in the legend of the main panel, wherever they are drawn
        panels.above.scatter([], [], marker="d", edgecolors=FAINT, s=26, label="blank", **HOLLOW)


def _draw_others(panels: _Panels, record: RunRecord) -> None:
    """Check standards at their nominal value; unknowns as ticks on the curve."""
    found = record.evaluation.quantities
    checks = [
        (q.nominal / q.dilution, q.mean_response)
        for q in found
        if q.role in ("check", "first-check") and q.nominal and q.mean_response is not None
    ]
    if checks:
        x, y = np.transpose(checks)
        style: dict[str, Any] = {"marker": "^", "edgecolors": CHECK, "s": 28, **HOLLOW}
        panels.above.scatter(x, y, zorder=4, label="check standard", **style)
    inside = [
        (q.concentration / q.dilution, q.mean_response)
        for q in found
        if q.role in ("unknown", "control") and q.concentration is not None and q.mean_response is not None
    ]
    if inside:
        x, y = np.transpose(inside)
        style = {"marker": "|", "color": UNKNOWN, "s": 80, "linewidths": 1.0}
        panels.above.scatter(x, y, zorder=3.5, label="unknown inside the range", **style)


def _draw_relative_errors(axes: Axes, record: RunRecord) -> None:
    axes.axhline(0, color=FAINT, linewidth=0.8, zorder=1)
    widest = _draw_limits(axes, record)
    shown = [s for s in _on_axis(record, record.evaluation.standards) if s.relative_error is not None]
    errors = [(s, s.concentration, 100 * s.relative_error) for s in shown if s.relative_error is not None]
    reach = max([1.25 * widest, *(1.15 * abs(e) for _, _, e in errors)], default=1.0)
    reach = min(reach, FARTHEST * widest) if widest else reach
    axes.set_ylim(-reach or -1.0, reach or 1.0)
    _draw_points(axes, [p for p in errors if abs(p[2]) <= reach])
    _draw_beyond(axes, [p for p in errors if abs(p[2]) > reach], reach)
    missing = sum(s.response is not None and s.relative_error is None for s in _judged(record))
    if missing:
        _say(axes, f"{missing} of {len(_judged(record))} standards: no back-calculated value", 0.99, 0.04)


def _draw_limits(axes: Axes, record: RunRecord) -> float:
    """Limit of each level as a step line; the widest in percent, 0 without any."""
    levels = sorted({s.concentration for s in _judged(record)})
    limits = [relative_error_limit(record, level) for level in levels]
    if len(levels) < 2 or any(limit is None for limit in limits):
        return 0.0
    values = np.array([100 * limit for limit in limits if limit is not None])
    edges = _edges(levels, record.evaluation.curve.response_model.logarithmic)
    for sign in (1, -1):
        axes.stairs(sign * values, edges, baseline=None, color=ALARM, linewidth=1.0, linestyle="--")
    style: dict[str, Any] = {"fontsize": SMALL, "color": ALARM, "ha": "right", "va": "bottom"}
    axes.annotate("limit", (edges[-1], values[-1]), xytext=(-2, 1), textcoords="offset points", **style)
    return float(values.max())


def _judged(record: RunRecord) -> list[StandardRecord]:
    return [s for s in record.evaluation.standards if s.role == "standard" and s.concentration > 0]


def _edges(levels: Sequence[float], logarithmic: bool) -> list[float]:
    """Bounds half-way between levels on the axis, and a little beyond the ends."""
    first, last = _beside(levels, logarithmic)
    middle = [float(np.sqrt(a * b)) if logarithmic else 0.5 * (a + b) for a, b in pairwise(levels)]
    return [first, *middle, last]


def _beside(levels: Sequence[float], logarithmic: bool) -> tuple[float, float]:
    low, high = min(levels), max(levels)
    if logarithmic:
        return low / BESIDE_FACTOR, high * BESIDE_FACTOR
    room = BESIDE_SHARE * ((high - low) or abs(high) or 1.0)
    return low - room, high + room


def _draw_beyond(axes: Axes, points: Sequence[tuple[StandardRecord, float, float]], reach: float) -> None:
    """Relative errors that would squeeze the panel: an arrowhead at its edge, the largest with its figure."""
    largest: dict[tuple[float, bool], float] = {}
    for _, x, error in points:
        largest[x, error > 0] = max(largest.get((x, error > 0), 0.0), error, key=abs)
    right = max((x for x, _ in largest), default=0.0)
    for (x, up), error in largest.items():
        y = 0.92 * reach if up else -0.92 * reach
        axes.scatter([x], [y], marker="^" if up else "v", color=ALARM, s=24, zorder=5)
        style: dict[str, Any] = {"va": "center", "fontsize": SMALL, "color": ALARM}
        aside: dict[str, Any] = (
            {"xytext": (-5, 0), "ha": "right"} if x == right else {"xytext": (5, 0), "ha": "left"}
        )
        axes.annotate(f"{error:+.0f} %", (x, y), textcoords="offset points", **style, **aside)


def _label(panels: _Panels, record: RunRecord) -> None:
    analyte = record.definition.analyte
    panels.response_axes.set_ylabel(
        in_brackets("response", record.definition.response_unit), fontsize=NORMAL, color=INK
    )
    panels.below.set_ylabel("relative error [%]", fontsize=NORMAL, color=INK)
    panels.below.set_xlabel(
        in_brackets(analyte, record.definition.concentration_unit), fontsize=NORMAL, color=INK
    )
    response = record.evaluation.curve.standards.response
    rising = response.size > 1 and response[-1] > response[0]
    _legend(panels.above, "upper left" if rising else "upper right")
    absent = sum(s.response is None for s in record.evaluation.standards)
    if absent:
        side = 0.99 if rising else 0.01
        words = "1 standard" if absent == 1 else f"{absent} standards"
        _say(panels.above, f"{words} without a response: not drawn", side, 0.02)


def _legend(axes: Axes, place: Literal["upper left", "upper right"]) -> None:
    """Name what is drawn; the excluded ones with their cross."""
    handles, labels = axes.get_legend_handles_labels()
    cross = axes.scatter([], [], **CROSS)
    shown = [(h, cross) if label == "excluded" else h for h, label in zip(handles, labels, strict=True)]
    axes.legend(shown, labels, loc=place, fontsize=SMALL, frameon=False, labelcolor=INK, handletextpad=0.6)


def _set_range(panels: _Panels, record: RunRecord) -> None:
    """Concentration axis a little beyond the standards, whatever else is drawn."""
    levels = [s.concentration for s in _on_axis(record, record.evaluation.standards)]
    if levels:
        plain_zero = [0.0] if panels.margin is None and _at_zero(record) else []
        logarithmic = record.evaluation.curve.response_model.logarithmic
        panels.above.set_xlim(*_beside([*levels, *([] if logarithmic else plain_zero)], logarithmic))


def _head(figure: Figure, record: RunRecord) -> None:
    heading, decision = record.heading, record.evaluation.verdict.decision
    run = f"run {heading.id}" if heading.id is not None else "run not yet logged"
    title = f"{heading.method} (version {heading.method_version}) on {heading.instrument}, {run}"
    figure.text(0.1, 0.962, title, fontsize=NORMAL + 1, color=INK, weight="bold")
    figure.text(0.1, 0.927, f"{heading.at:%Y-%m-%d %H:%M}", fontsize=NORMAL, color=FAINT)
    rejected = decision == "rejected" or heading.void_reason is not None
    words = "VOID" if heading.void_reason else decision.upper() if rejected else decision
    figure.text(
        0.975,
        0.962,
        words,
        fontsize=NORMAL + 1,
        ha="right",
        weight="bold",
        color=ALARM if rejected else CHECK,
    )


def _say(axes: Axes, words: str, x: float, y: float) -> None:
    side = "right" if x > 0.9 else "left" if x < 0.1 else "center"
    axes.text(x, y, words, transform=axes.transAxes, ha=side, va="bottom", fontsize=SMALL, color=ALARM)
