"""Detection limits of a method on an instrument, from what was logged: each by a named procedure."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from calib import store as tables
from calib.bench.find import instrument_named, method_named
from calib.bench.records import RunRecord
from calib.bench.show_run import list_runs, show_run
from calib.errors import InputError, NotFound
from calib.quantification.curve_limits import CurveLimits, curve_limits
from calib.quantification.detection import MethodDetectionLimit, method_detection_limit

RUNS = 20


@dataclass(frozen=True, slots=True)
class DetectionRecord:
    """Limits of one method and instrument, in the method's unit.

    Attributes
    ----------
    runs : tuple of int
        Accepted calibration runs they come from, oldest first.
    latest : CurveLimits
        Of the latest curve.
    typical : CurveLimits
        Medians over the runs; nan where no curve has the limit.
    blanks : tuple of float or None
        Blanks as their curves read them; None where a blank has no concentration.
    spikes : tuple of float
        Results of the spiked samples asked for.
    method_limit : MethodDetectionLimit or None
        None where no spiked samples were named.
    """

    instrument: str
    method: str
    unit: str
    replicates: int
    runs: tuple[int, ...]
    latest: CurveLimits
    typical: CurveLimits
    blanks: tuple[float | None, ...]
    spikes: tuple[float, ...]
    method_limit: MethodDetectionLimit | None


def detection_limits(
    store: tables.Store,
    instrument: str,
    method: str,
    *,
    spikes: str | None = None,
    replicates: int = 1,
    runs: int = RUNS,
) -> DetectionRecord:
    """Compute the limits from the latest accepted runs.

    Parameters
    ----------
    spikes : str, optional
        How the names of the spiked samples begin; without it there is no method detection limit.
    replicates : int
        Readings of a sample, for the limits of the curve.
    runs : int
        Accepted calibration runs at most.

    Raises
    ------
    NotFound
        For an unknown instrument or method, or when no accepted run is logged.
    InputError
        With fewer than seven spiked samples.
    """
    with store.reading() as session:
        instrument_named(session, instrument)
        method_named(session, method)
    lines = list_runs(store, instrument=instrument, method=method)
    usable = [line.id for line in lines if not line.void and line.decision not in (None, "rejected")][-runs:]
    if not usable:
        raise NotFound(
            f"no accepted curve of {instrument} and method {method} is logged; log standards first"
        )
    records = [show_run(store, number) for number in usable]
    found = [_limits(r, replicates) for r in records]
    blanks = tuple(b for r in records for b in _blanks(r))
    spiked = tuple(s for r in records for s in _spiked(r, spikes)) if spikes else ()
    if spikes and not spiked:
        raise InputError(f"no sample whose name begins with '{spikes}' has a result in the runs looked at")
    return DetectionRecord(
        instrument=instrument,
        method=method,
        unit=records[-1].definition.concentration_unit,
        replicates=replicates,
        runs=tuple(usable),
        latest=found[-1],
        typical=_median(found),
        blanks=blanks,
        spikes=spiked,
        method_limit=method_detection_limit(spiked, blanks) if spikes else None,
    )


def _limits(record: RunRecord, replicates: int) -> CurveLimits:
    """Limits of the curve of a run; nothing is quantified below its lowest standard, anchors apart."""
    found = curve_limits(record.evaluation.curve, replicates)
    lowest = record.evaluation.verdict.lowest
    return found if lowest is None else replace(found, quantifiable=max(found.quantifiable, lowest))


def _blanks(record: RunRecord) -> list[float | None]:
    return [
        b.back_calculated for b in record.evaluation.blanks if b.role == "blank" and b.response is not None
    ]


def _spiked(record: RunRecord, beginning: str) -> list[float]:
    return [
        q.concentration
        for q in record.evaluation.quantities
        if q.role in ("unknown", "control") and q.sample.startswith(beginning) and q.concentration is not None
    ]


def _median(found: Sequence[CurveLimits]) -> CurveLimits:
    def middle(values: list[float]) -> float:
        known = np.array(values)[np.isfinite(values)]
        return float(np.median(known)) if known.size else float("nan")

    return CurveLimits(
        middle([f.critical for f in found]),
        middle([f.detectable for f in found]),
        middle([f.quantifiable for f in found]),
    )
