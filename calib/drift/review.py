"""The drift review of one instrument and method: its charts, their limits and their signals.

A run is judged by the runs before it only: the first 20 accepted values after the last declared
restart, or as many as there were by then. So a signal, once given, does not go away as runs are added.
"""

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike, NDArray

from calib.drift.charts import FINAL_RUNS, ControlLimits, beyond, shewhart_limits
from calib.drift.references import OffBaseline
from calib.errors import InputError

OFF_THE_BASELINE = (OffBaseline.BELOW.value, OffBaseline.ABOVE.value)


@dataclass(frozen=True, slots=True)
class Track:
    """One quantity followed over the runs, as the caller hands it in.

    Attributes
    ----------
    family : str
        Charts of one family share the false-alarm rate, for example 'response' or 'check standards'.
    name : str
        For example 'low', 'middle', 'high'.
    values : (runs,) array
        In the order of time; nan where a run has no value.
    reasons : sequence of str
        Why a value is missing, empty where it is not; may be left out. A value that left the baseline
        (`OffBaseline.BELOW` or `ABOVE`) is a signal, as no limit can be wider than the baseline.
    """

    family: str
    name: str
    values: ArrayLike
    reasons: Sequence[str] = ()


@dataclass(frozen=True, slots=True)
class DriftSeries:
    """One chart.

    Attributes
    ----------
    family, name : str
        As handed in.
    values : (runs,) array
        As handed in, rejected runs included.
    reasons : tuple of str
        Why a value is missing; empty where it is not.
    baseline : tuple of int
        Indices of the runs the present limits rest on.
    limits : ControlLimits or None
        The present limits; None with too few baseline runs.
    signals : (runs,) array of bool
        Runs beyond the limits in force at their time; never before the restart.
    first_signals : tuple of int
        The first run of each excursion; runs without a value do not end one.
    """

    family: str
    name: str
    values: NDArray[np.float64] = field(repr=False)
    reasons: tuple[str, ...] = field(repr=False)
    baseline: tuple[int, ...]
    limits: ControlLimits | None
    signals: NDArray[np.bool_] = field(repr=False)
    first_signals: tuple[int, ...]


@dataclass(frozen=True, slots=True)
class DriftReview:
    """All charts of one instrument and method.

    Attributes
    ----------
    series : tuple of DriftSeries
        In the order handed in.
    accepted : tuple of bool
        Which runs were accepted; the others are shown and judged, but no limit rests on them.
    restart : int
        First run of the present segment.
    """

    series: tuple[DriftSeries, ...]
    accepted: tuple[bool, ...]
    restart: int

    def signals_of(self, run: int) -> tuple[str, ...]:
        """Name the charts that signal at a run, as 'family name'."""
        return tuple(f"{s.family} {s.name}" for s in self.series if s.signals[run])

    @property
    def first_signals(self) -> tuple[int, ...]:
        """Runs at which any chart begins an excursion, in order."""
        return tuple(sorted({run for series in self.series for run in series.first_signals}))

    @property
    def provisional(self) -> bool:
        """Whether any chart has no limits yet, or provisional ones."""
        return any(s.limits is None or s.limits.provisional for s in self.series)


def review_drift(tracks: Sequence[Track], accepted: Sequence[bool], restart: int = 0) -> DriftReview:
    """Review the runs of one instrument and method.

    Parameters
    ----------
    tracks : sequence of Track
        One a chart, all over the same runs in the order of time.
    accepted : (runs,) sequence of bool
        Which runs may serve as baseline.
    restart : int
        Index of the first run after the last declared restart (new lot, repair).

    Returns
    -------
    DriftReview

    Raises
    ------
    InputError
        The tracks differ in length, or the restart is no index of a run (or just past the last).
    """
    runs = len(accepted)
    if not 0 <= restart <= runs:
        raise InputError(
            f"drift review: restart {restart} is outside the {runs} runs; give an index from 0 to {runs}"
        )
    series = tuple(_series(track, accepted, restart, _charts(track, tracks)) for track in tracks)
    return DriftReview(series, tuple(bool(a) for a in accepted), restart)


def _charts(track: Track, tracks: Sequence[Track]) -> int:
    return sum(other.family == track.family for other in tracks)


def _series(track: Track, accepted: Sequence[bool], restart: int, charts: int) -> DriftSeries:
    values, reasons = _checked(track, len(accepted))
    usable = [i for i in range(restart, values.size) if accepted[i] and np.isfinite(values[i])]
    signals = _signals(values, reasons, usable, charts)
    return DriftSeries(
        family=track.family,
        name=track.name,
        values=values,
        reasons=reasons,
        baseline=tuple(usable[:FINAL_RUNS]),
        limits=shewhart_limits(values[usable[:FINAL_RUNS]], charts),
        signals=signals,
        first_signals=_first_signals(signals, values, reasons),
    )


def _checked(track: Track, runs: int) -> tuple[NDArray[np.float64], tuple[str, ...]]:
    values = np.array(track.values, dtype=np.float64)
    reasons = tuple(str(reason) for reason in track.reasons) or ("",) * runs
    if values.shape != (runs,) or len(reasons) != runs:
        raise InputError(
            f"drift review, {track.family} {track.name}: {values.size} values and {len(reasons)} reasons"
            f" for {runs} runs; give one a run"
        )
    values.setflags(write=False)
    return values, reasons


def _signals(
    values: NDArray[np.float64], reasons: tuple[str, ...], usable: list[int], charts: int
) -> NDArray[np.bool_]:
    """Judge each run by the limits that stood before it; there are none up to the restart."""
    signals = np.zeros(values.size, dtype=np.bool_)
    for run in range(values.size):
        before = [i for i in usable[:FINAL_RUNS] if i < run]
        limits = shewhart_limits(values[before], charts)
        if limits is not None:
            signals[run] = reasons[run] in OFF_THE_BASELINE or bool(beyond(values[run], limits))
    signals.setflags(write=False)
    return signals


def _first_signals(
    signals: NDArray[np.bool_], values: NDArray[np.float64], reasons: tuple[str, ...]
) -> tuple[int, ...]:
    """Signals that follow no signal, runs without any value apart."""
    told = [i for i in range(values.size) if np.isfinite(values[i]) or reasons[i] in OFF_THE_BASELINE]
    return tuple(run for k, run in enumerate(told) if signals[run] and not (k and signals[told[k - 1]]))
