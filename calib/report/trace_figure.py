"""A trace as a picture: what stands behind a result, or what follows from a thing, left to right."""

from __future__ import annotations

import textwrap
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

from calib.report.drawing import ALARM, CURVE, FAINT, INK, RULE, SMALL, new_figure
from calib.report.wording import visible

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from calib.bench.trace_forward import Affected, AffectedQuantity
    from calib.bench.trace_records import Trace, Traced

STAGES = (
    "origin",
    "material, file",
    "run of the curve",
    "curve",
    "run of the sample",
    "result",
    "review",
    "report",
)
WIDTH, GAP = 2.05, 0.55  # inches of a box, and between the columns
LINE, PADDING = 0.145, 0.14
CHARACTERS = 33
LONGEST_FACT = 3  # lines of one fact
MOST_FACTS = 7
MOST_RUNS = 12
# Facts that tell a reader of the picture nothing the title does not.
LEFT_OUT = ("name", "sample", "layout", "reader version", "size", "fixed", "solver")


@dataclass(frozen=True, slots=True)
class _Box:
    key: str
    column: int
    title: str
    lines: tuple[str, ...]
    mark: str = ""

    @property
    def height(self) -> float:
        return PADDING * 2 + LINE * (len(self.lines) + 1 + bool(self.mark))


def trace_figure(trace: Trace) -> Figure:
    """Draw what stands behind a result: certificate, file, run, curve, quantity, review, report."""
    boxes = [_thing(t) for t in trace.things]
    names = {t.stage: STAGES[t.stage] for t in trace.things}
    return _draw(boxes, [(s.source, s.target) for s in trace.steps], names, trace.start, _head(trace))


def affected_figure(affected: Affected) -> Figure:
    """Draw what follows from a thing: runs with their results, those with issued reports first."""
    start = _Box("start", 0, affected.start, ())
    others = [_Box(other, 1, other, ()) for other in affected.others]
    boxes, links = [start, *others], [("start", other.key) for other in others]
    results: dict[int, list[AffectedQuantity]] = {run: [] for run in affected.runs}
    for quantity in affected.quantities:
        results[quantity.run].append(quantity)
    reports = {run: sorted({n for q in found for n in q.reports}) for run, found in results.items()}
    for run in sorted(results, key=lambda n: (not reports[n], -n))[:MOST_RUNS]:
        boxes.append(_Box(f"run {run}", 2, f"run {run}", _run_lines(results[run])))
        links.extend((b.key, f"run {run}") for b in (others or [start]))
        for report in reports[run]:
            boxes.append(_Box(f"report {report}", 7, f"report {report}", ()))
            links.append((f"run {run}", f"report {report}"))
    left = len(affected.runs) - MOST_RUNS
    if left > 0:
        boxes.append(_Box("more", 2, f"and {left} earlier runs", ("all are in the table",)))
        links.append(("start", "more"))
    names = {0: "from", 1: "by way of", 2: "run", 7: "report"}
    return _draw(boxes, links, names, f"what rests on {affected.start}", _head(affected))


def _head(trace: Trace | Affected) -> str:
    return f"record chain at entry {trace.chain_sequence}: {trace.chain_head}"


def _run_lines(results: Sequence[AffectedQuantity]) -> tuple[str, ...]:
    if not results:
        return ("no results",)
    q = results[0]
    gone = sum(1 for q in results if q.superseded_by is not None)
    return (
        f"{q.measured:%Y-%m-%d %H:%M}",
        f"{q.instrument}, {q.method}",
        "void" if q.void else q.review,
        f"{len(results) - gone} results" + (f", {gone} superseded" if gone else ""),
    )


def _thing(thing: Traced) -> _Box:
    lines: list[str] = []
    told = [(name, value) for name, value in thing.facts if name not in LEFT_OUT]
    for name, value in told[:MOST_FACTS]:
        lines.extend(textwrap.wrap(visible(f"{name}: {value}"), CHARACTERS)[:LONGEST_FACT])
    if thing.entry is not None:
        lines.append(f"entry {thing.entry} of the record chain")
    mark = f"superseded by {thing.superseded_by}" if thing.superseded_by else ""
    return _Box(thing.key, thing.stage, visible(thing.title), tuple(lines), mark)


def _draw(
    boxes: Sequence[_Box],
    links: Iterable[tuple[str, str]],
    names: dict[int, str],
    title: str,
    foot: str,
) -> Figure:
    columns = sorted({b.column for b in boxes})
    stacks = {c: [b for b in boxes if b.column == c] for c in columns}
    tall = max(sum(b.height + PADDING for b in stack) for stack in stacks.values())
    width, height = len(columns) * (WIDTH + GAP) + GAP, tall + 1.3
    figure = new_figure(width, height)
    axes = figure.add_axes((0.0, 0.0, 1.0, 1.0))
    axes.set(xlim=(0, width), ylim=(0, height))
    axes.axis("off")
    axes.text(GAP / 2, height - 0.25, visible(title), color=INK, fontsize=11, fontweight="bold", va="center")
    axes.text(GAP / 2, 0.18, foot, color=FAINT, fontsize=6, va="center")
    places = {}
    for order, column in enumerate(columns):
        x = GAP / 2 + order * (WIDTH + GAP)
        axes.text(x, height - 0.6, names.get(column, ""), color=FAINT, fontsize=SMALL, va="center")
        top = height - 0.8 - (tall - sum(b.height + PADDING for b in stacks[column])) / 2
        for box in stacks[column]:
            places[box.key] = (x, top, box.height)
            _draw_box(axes, box, x, top)
            top -= box.height + PADDING
    for source, target in links:
        if source in places and target in places:
            _draw_link(axes, places[source], places[target])
    return figure


def _draw_box(axes: Axes, box: _Box, x: float, top: float) -> None:
    from matplotlib.patches import FancyBboxPatch

    edge, style = (ALARM, "dashed") if box.mark else (CURVE, "solid")
    axes.add_patch(
        FancyBboxPatch(
            (x, top - box.height),
            WIDTH,
            box.height,
            boxstyle="round,pad=0,rounding_size=0.06",
            facecolor="white",
            edgecolor=edge,
            linestyle=style,
            linewidth=1.1,
            zorder=3,
        )
    )
    lines = [(box.title[:CHARACTERS], INK, "bold"), *((line, INK, "normal") for line in box.lines)]
    if box.mark:
        lines.append((box.mark, ALARM, "normal"))
    for number, (text, colour, weight) in enumerate(lines):
        axes.text(
            x + 0.08,
            top - PADDING - LINE * (number + 0.4),
            text,
            color=colour,
            fontsize=6.6,
            fontweight=weight,
            va="center",
            zorder=4,
        )


def _draw_link(axes: Axes, source: tuple[float, float, float], target: tuple[float, float, float]) -> None:
    from matplotlib.patches import FancyArrowPatch

    forward = source[0] < target[0]
    start = (source[0] + (WIDTH if forward else 0.0), source[1] - source[2] / 2)
    end = (target[0] + (0.0 if forward else WIDTH), target[1] - target[2] / 2)
    if source[0] == target[0]:
        start, end = (source[0] + 0.1, source[1] - source[2]), (target[0] + 0.1, target[1])
    axes.add_patch(
        FancyArrowPatch(
            start,
            end,
            arrowstyle="-|>",
            mutation_scale=8,
            color=RULE,
            linewidth=0.9,
            connectionstyle="arc3,rad=0.0",
            zorder=1,
        )
    )
