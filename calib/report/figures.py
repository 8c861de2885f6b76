"""The pictures: one run, one instrument over time, and the proof of a method."""

from calib.report.curve_figure import curve_figure
from calib.report.drift_figure import drift_figure
from calib.report.proof_figure import proof_figure

__all__ = ["curve_figure", "drift_figure", "proof_figure"]
