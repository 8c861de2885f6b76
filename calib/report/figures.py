"""The pictures: one run, and one instrument over time."""

from calib.report.curve_figure import curve_figure
from calib.report.drift_figure import drift_figure

__all__ = ["curve_figure", "drift_figure"]
