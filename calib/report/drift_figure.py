"""The picture of a drift review: small multiples on one time axis, events marked through all of them."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import datetime
from itertools import pairwise
from typing import TYPE_CHECKING, Any

import numpy as np

from calib.acceptance.wording import count
from calib.drift.charts import FEWEST_RUNS
from calib.report.drawing import ALARM, CURVE, FAINT, INK, NORMAL, RULE, SMALL, new_figure, tidy
from calib.report.wording import in_brackets, number, with_unit

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure
    from numpy.typing import NDArray

    from calib.bench.review_drift import DriftRecord
    from calib.drift.charts import ControlLimits
    from calib.drift.review import DriftSeries

NAMES = ("low", "middle", "high")
CHECKS = "check standards"
# A value farther off than so many times the spread of the accepted runs stands at the edge.
FARTHEST = 2.5
SHORTEST_GAP = 0.022  # of the axis, between the letters of two marks
KEY_WIDTH = 84  # characters of one line of the key
HEIGHT, LINE, KEY_LINES = 8.0, 0.15, 6  # inches; a longer key makes a taller picture


@dataclass(frozen=True, slots=True)
class _Mark:
    """An event, or a change of the standard lot, with the letter it has in the picture."""

    letter: str
    at: datetime
    words: str
    lot: bool


@dataclass(frozen=True, slots=True)
class _Chart:
    """One panel: values in the unit of its axis, and its limits where it is judged."""

    label: str
    values: NDArray[np.float64]
    signals: NDArray[np.bool_]
    centre: float | None = None
    lower: float | None = None
    upper: float | None = None
    limits: ControlLimits | None = None
    baseline: tuple[int, ...] = ()
    judged: bool = True


def drift_figure(record: DriftRecord) -> Figure:
    """Draw the review of one instrument and method over time.

    Left: what a fixed sample would have read, as a change in percent, and the recovery of the
    check standards. Right: the responses that are judged, in percent of their centre.

    Parameters
    ----------
    record : DriftRecord

    Returns
    -------
    matplotlib.figure.Figure
    """
    marks = _marks(record)
    lines = _key_lines(marks)
    height = HEIGHT + LINE * max(0, len(lines) - KEY_LINES)
    figure = new_figure(11.2, height)
    top, bottom = 1 - 0.88 / height, (height - HEIGHT + 0.48) / height
    grid = figure.add_gridspec(
        4, 2, left=0.065, right=0.985, bottom=bottom, top=top, hspace=0.22, wspace=0.14
    )
    shared: Axes | None = None
    for row, column, chart in _charts(record):
        axes = figure.add_subplot(grid[row, column], sharex=shared)
        shared = shared or axes
        _draw_chart(axes, record, chart)
        _draw_marks(axes, record, marks, lettered=row == 0)
        _time_axis(axes, record, labelled=row == 3 or (row, column) == (2, 1))
    _head(figure, record, height)
    _key(figure.add_subplot(grid[3, 1]), lines)
    return figure


def _charts(record: DriftRecord) -> list[tuple[int, int, _Chart]]:
    """Row, column and content of each panel."""
    responses = [s for s in record.review.series if s.family != CHECKS]
    found: list[tuple[int, int, _Chart]] = []
    for j, (series, reference) in enumerate(zip(responses, record.references, strict=True)):
        found.append((j, 0, _shift_chart(record, j, series)))
        found.append((j, 1, _response_chart(record, series, reference)))
    recovery = next(s for s in record.review.series if s.family == CHECKS)
    found.append((3, 0, _recovery_chart(record, recovery)))
    return found


def _shift_chart(record: DriftRecord, j: int, series: DriftSeries) -> _Chart:
    at = with_unit(number(record.references[j]), record.concentration_unit)
    nothing = np.zeros(series.signals.size, dtype=np.bool_)
    label = f"shift of a sample\nof {at} [%]"
    values = _at_edge(record.shift_percent[:, j], series.reasons)
    return _Chart(label, values, nothing, centre=0.0, judged=False)


def _at_edge(values: NDArray[np.float64], reasons: Sequence[str]) -> NDArray[np.float64]:
    """A response beyond the baseline has no shift in figures; it is drawn at the edge."""
    ends = {"low end": -np.inf, "high end": np.inf}
    side = [next((v for words, v in ends.items() if words in reason), np.nan) for reason in reasons]
    return np.where(np.isfinite(values), values, side)


def _response_chart(record: DriftRecord, series: DriftSeries, reference: float) -> _Chart:
    """Response in percent of the centre; as it is where there are no limits yet."""
    at, limits = with_unit(number(reference), record.concentration_unit), series.limits
    if limits is None or limits.centre == 0:
        label = in_brackets(f"response\nat {at}", record.response_unit)
        return _Chart(label, series.values, series.signals)
    share = 100.0 / limits.centre
    low, high = sorted((share * limits.lower, share * limits.upper))
    centre = with_unit(number(limits.centre), record.response_unit)
    label = f"response at {at}\n[% of {centre}]"
    return _Chart(label, share * series.values, series.signals, 100.0, low, high, limits, series.baseline)


def _recovery_chart(record: DriftRecord, series: DriftSeries) -> _Chart:
    label, limits = "recovery of check\nstandards [%]", series.limits
    if limits is None:
        return _Chart(label, record.recovery_percent, series.signals, centre=100.0)
    low, centre, high = (100.0 * float(np.exp(v)) for v in (limits.lower, limits.centre, limits.upper))
    return _Chart(label, record.recovery_percent, series.signals, centre, low, high, limits, series.baseline)


def _draw_chart(axes: Axes, record: DriftRecord, chart: _Chart) -> None:
    tidy(axes)
    axes.set_ylabel(chart.label, fontsize=SMALL, color=INK)
    low, high = _reach(record, chart)
    axes.set_ylim(low, high)
    _draw_limits(axes, record, chart)
    _draw_runs(axes, record, chart, low, high)
    if chart.judged and chart.limits is None:
        number_of = int(np.isfinite(chart.values).sum())
        words = f"no limits yet: {FEWEST_RUNS} accepted runs are needed" if number_of else "no values"
        axes.text(0.01, 0.95, words, transform=axes.transAxes, va="top", fontsize=SMALL, color=FAINT)


def _reach(record: DriftRecord, chart: _Chart) -> tuple[float, float]:
    """Range of the axis: accepted runs and limits; a rejected run may widen it, but not rule it."""
    accepted = np.array(record.review.accepted)
    kept = [*chart.values[accepted & np.isfinite(chart.values)]]
    kept += [v for v in (chart.centre, chart.lower, chart.upper) if v is not None]
    if not kept:
        return -1.0, 1.0
    low, high = float(min(kept)), float(max(kept))
    room = (high - low) or abs(high) or 1.0
    others = chart.values[np.isfinite(chart.values)]
    low = max(float(others.min(initial=low)), low - (FARTHEST - 1) * room) if others.size else low
    high = min(float(others.max(initial=high)), high + (FARTHEST - 1) * room) if others.size else high
    room = 0.12 * ((high - low) or abs(high) or 1.0)
    return low - room, high + room


def _draw_limits(axes: Axes, record: DriftRecord, chart: _Chart) -> None:
    """Centre and limits from the restart on; provisional limits are dashed."""
    times = [_when(run.at) for run in record.runs]
    if chart.centre is not None:
        axes.axhline(chart.centre, color=FAINT, linewidth=0.8, zorder=1)
    if chart.limits is None or record.restart >= len(times):
        return
    style = (0, (4, 2)) if chart.limits.provisional else "-"
    for value in (chart.lower, chart.upper):
        if value is not None:
            ends = [times[record.restart], times[-1]]
            axes.plot(ends, [value, value], color=CURVE, linewidth=1.1, linestyle=style, zorder=2)
    if chart.baseline:
        axes.axvspan(times[chart.baseline[0]], times[chart.baseline[-1]], color=RULE, alpha=0.3, linewidth=0)


def _draw_runs(axes: Axes, record: DriftRecord, chart: _Chart, low: float, high: float) -> None:
    """Filled: accepted; hollow: rejected; diamond: signal; arrowhead: beyond the axis."""
    for i, run in enumerate(record.runs):
        value = float(chart.values[i])
        if np.isnan(value):
            continue
        beyond = not low <= value <= high
        shown = min(max(value, low + 0.05 * (high - low)), high - 0.05 * (high - low)) if beyond else value
        shape = ("^" if value > high else "v") if beyond else "D" if chart.signals[i] else "o"
        colour = ALARM if chart.signals[i] else INK
        axes.scatter(
            [_when(run.at)],
            [shown],
            marker=shape,
            s=22 if shape != "o" else 13,
            facecolors=colour if record.review.accepted[i] else "white",
            edgecolors=colour,
            linewidths=0.9,
            zorder=4,
            clip_on=False,
        )
        if beyond and np.isfinite(value):
            _name_value(axes, run.at, shown, value)


def _name_value(axes: Axes, at: datetime, shown: float, value: float) -> None:
    axes.annotate(
        number(value, 3),
        (_when(at), shown),
        xytext=(5, 0),
        textcoords="offset points",
        va="center",
        fontsize=SMALL - 0.5,
        color=FAINT,
    )


def _marks(record: DriftRecord) -> tuple[_Mark, ...]:
    """Events and changes of the lot, in order of time, lettered."""
    found = [(e.at, f"{e.kind}: {e.what}", False) for e in record.events]
    for before, after in pairwise(record.runs):
        if before.lot != after.lot:
            found.append((after.at, f"lot {before.lot or 'not named'} → {after.lot or 'not named'}", True))
    first, last = record.runs[0].at, record.runs[-1].at
    within = sorted(f for f in found if _day(first) <= _day(f[0]) <= _day(last))
    return tuple(_Mark(_letter(i), at, words, lot) for i, (at, words, lot) in enumerate(within))


def _day(at: datetime) -> int:
    return at.toordinal()


def _letter(i: int) -> str:
    """A … Z, then A1 … Z1 and so on."""
    return chr(ord("A") + i % 26) + (str(i // 26) if i >= 26 else "")


def _draw_marks(axes: Axes, record: DriftRecord, marks: Sequence[_Mark], lettered: bool) -> None:
    span = (record.runs[-1].at - record.runs[0].at).total_seconds() or 1.0
    before: datetime | None = None
    step = 0
    for mark in marks:
        style = ":" if mark.lot else "--"
        axes.axvline(_when(mark.at), color=FAINT, linewidth=0.9, linestyle=style, zorder=1.5)
        close = before is not None and (mark.at - before).total_seconds() < SHORTEST_GAP * span
        before, step = mark.at, step + 1 if close else 0
        if lettered:
            axes.annotate(
                mark.letter,
                (_when(mark.at), 1.0),
                xycoords=("data", "axes fraction"),
                xytext=(0, 2 + 9 * step),
                textcoords="offset points",
                ha="center",
                fontsize=SMALL,
                color=INK,
                weight="bold",
            )


def _when(at: datetime) -> float:
    """A moment as the time axis counts it."""
    from matplotlib.dates import date2num

    return float(date2num(at))  # type: ignore[no-untyped-call]


def _time_axis(axes: Axes, record: DriftRecord, labelled: bool) -> None:
    from matplotlib.dates import AutoDateLocator, ConciseDateFormatter

    zone = record.runs[0].at.tzinfo
    locator = AutoDateLocator(tz=zone, minticks=3, maxticks=7)  # type: ignore[no-untyped-call]
    axes.xaxis.set_major_locator(locator)
    axes.xaxis.set_major_formatter(ConciseDateFormatter(locator, tz=zone))  # type: ignore[no-untyped-call]
    axes.tick_params(axis="x", labelbottom=labelled)
    axes.xaxis.get_offset_text().set_fontsize(SMALL)


def _head(figure: Figure, record: DriftRecord, height: float) -> None:
    first, last = record.runs[0].at, record.runs[-1].at
    title = f"Drift of {record.instrument}, method {record.method}"
    figure.text(0.065, 1 - 0.28 / height, title, fontsize=NORMAL + 2, color=INK, weight="bold")
    words = f"{count(len(record.runs), 'run')}, {first:%Y-%m-%d} to {last:%Y-%m-%d}; {_limits_words(record)}"
    figure.text(0.065, 1 - 0.47 / height, words, fontsize=NORMAL, color=FAINT)


def _limits_words(record: DriftRecord) -> str:
    limits = [s.limits for s in record.review.series if s.limits is not None]
    if not limits:
        return f"no limits yet ({count(record.baseline_runs, 'baseline run')})"
    kind = "provisional limits" if any(v.provisional for v in limits) else "limits"
    return f"{kind} from {record.baseline_runs} baseline runs"


def _key(axes: Axes, lines: Sequence[str]) -> None:
    """What the shapes mean, and the events by letter."""
    from matplotlib.lines import Line2D
    from matplotlib.patches import Patch

    axes.set_axis_off()
    dot: dict[str, Any] = {"linestyle": "", "markersize": 4.5}
    shapes = [
        Line2D([], [], marker="o", color=INK, label="accepted run", **dot),
        Line2D([], [], marker="o", color=INK, markerfacecolor="white", label="rejected run", **dot),
        Line2D([], [], marker="D", color=ALARM, label="signal: beyond the limits of its day", **dot),
        Line2D([], [], marker="^", color=INK, label="beyond this axis", **dot),
        Line2D([], [], color=CURVE, linewidth=1.1, label="limits now"),
        Line2D([], [], color=CURVE, linewidth=1.1, linestyle=(0, (4, 2)), label="provisional limits"),
        Patch(color=RULE, alpha=0.5, label="baseline runs"),
        Line2D([], [], color=FAINT, linewidth=0.9, linestyle="--", label="event"),
        Line2D([], [], color=FAINT, linewidth=0.9, linestyle=":", label="new standard lot"),
    ]
    axes.legend(
        handles=shapes,
        loc="upper left",
        bbox_to_anchor=(-0.02, 0.9),
        ncols=3,
        fontsize=SMALL,
        frameon=False,
        labelcolor=INK,
        handletextpad=0.4,
        columnspacing=1.0,
        borderpad=0,
    )
    axes.text(0, 0.46, "\n".join(lines), va="top", fontsize=SMALL, color=INK, linespacing=1.35)


def _key_lines(marks: Sequence[_Mark]) -> list[str]:
    from textwrap import wrap

    entries = [f"{m.letter}  {m.at:%Y-%m-%d}  {m.words}" for m in marks]
    return [line for entry in entries for line in wrap(entry, KEY_WIDTH, subsequent_indent="     ")]
