"""What all pictures share: colours, sizes, the bare figure, plain tick labels."""

from __future__ import annotations

from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

# Dark and light enough apart to be told in grey, and by people who see few colours; every
# one comes with a shape or a line style of its own.
INK = "#1c2733"
CURVE = "#1f5f99"
ALARM = "#b3430e"
CHECK = "#0c7466"
UNKNOWN = "#84439b"
FAINT = "#7a8591"
RULE = "#c3cad1"

SMALL, NORMAL = 7.5, 8.5


def new_figure(width: float, height: float) -> Figure:
    """Make an empty figure of so many inches that draws without a screen."""
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    figure = Figure(figsize=(width, height), dpi=120, facecolor="white")
    FigureCanvasAgg(figure)
    return figure


def tidy(axes: Axes) -> None:
    """Take away the frame that says nothing, and make the rest quiet."""
    axes.spines[["top", "right"]].set_visible(False)
    axes.spines[["left", "bottom"]].set_color(FAINT)
    axes.tick_params(which="both", color=FAINT, labelcolor=INK, labelsize=SMALL)


def logarithmic_x(axes: Axes) -> None:
    """Set a logarithmic axis whose ticks are plain numbers."""
    from matplotlib.ticker import FuncFormatter, LogLocator, NullFormatter

    axes.set_xscale("log")
    axes.xaxis.set_major_locator(LogLocator(subs=(1.0, 2.0, 5.0)))
    axes.xaxis.set_major_formatter(FuncFormatter(lambda x, _: f"{x:g}"))
    axes.xaxis.set_minor_formatter(NullFormatter())
