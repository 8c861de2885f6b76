"""Drift of an instrument over its runs: control charts on responses and check standards."""

from calib.drift.charts import ControlLimits, beyond, shewhart_limits
from calib.drift.references import (
    Axis,
    Baseline,
    EquivalentConcentrations,
    OffBaseline,
    equivalent_concentrations,
    ln_recovery,
    tabulate_baseline,
)
from calib.drift.review import DriftReview, DriftSeries, Track, review_drift

__all__ = [
    "Axis",
    "Baseline",
    "ControlLimits",
    "DriftReview",
    "DriftSeries",
    "EquivalentConcentrations",
    "OffBaseline",
    "Track",
    "beyond",
    "equivalent_concentrations",
    "ln_recovery",
    "review_drift",
    "shewhart_limits",
    "tabulate_baseline",
]
