"""The pictures: one run, one instrument over time, proof and assessment of a method, what a result rests on."""

from calib.report.assessment_figure import assessment_figure
from calib.report.curve_figure import curve_figure
from calib.report.drift_figure import drift_figure
from calib.report.proof_figure import proof_figure
from calib.report.trace_figure import affected_figure, trace_figure

__all__ = [
    "affected_figure",
    "assessment_figure",
    "curve_figure",
    "drift_figure",
    "proof_figure",
    "trace_figure",
]
