"""What the acceptance criteria look at, from the readings of a run and its curve."""

from __future__ import annotations

import math
from collections import Counter
from collections.abc import Iterable, Sequence
from dataclasses import replace

import numpy as np

from calib.acceptance import Evidence, JudgedCheck, JudgedStandard
from calib.acceptance.control_criteria import ControlsInSampleRange
from calib.bench.method_definition import MethodDefinition
from calib.bench.records import BlankRecord, Measured, StandardRecord
from calib.curves.curve import Curve
from calib.quantification.inverse import concentration_of

JUDGED_ROLES = ("check", "first-check", "control")


def evidence_of(
    definition: MethodDefinition,
    readings: Sequence[Measured],
    curve: Curve,
    standards: Sequence[StandardRecord],
    blanks: Sequence[BlankRecord],
) -> Evidence:
    """Gather the evidence for the verdict on a curve.

    Parameters
    ----------
    definition : MethodDefinition
    readings : sequence of Measured
        Of the run, in the order of the file.
    curve : Curve
    standards, blanks : sequences
        As the curve reads them.
    """
    judged = [_judged(s) for s in standards if s.response is not None or s.saturated]
    if definition.fit_blank:
        judged += [
            _fitted_blank(r) for r in readings if r.role in ("blank", "zero") and r.response is not None
        ]
    ends = _ends(judged)
    return Evidence(
        standards=tuple(_seen_by(curve, judged)),
        checks=tuple(_checks(curve, [r for r in readings if r.role in JUDGED_ROLES])),
        blanks=tuple(
            math.nan if b.back_calculated is None else b.back_calculated
            for b in blanks
            if b.role == "blank" and b.response is not None
        ),
        converged=curve.converged,
        findings=tuple((f.code, f.message) for f in curve.findings),
        residual_sd=curve.residual_sd,
        free_parameters=int(curve.free.sum()),
        r_squared=curve.r_squared,
        concentration_unit=definition.concentration_unit,
        model=definition.model,
        end_slopes=_slopes(curve, ends),
        counts=_counts(readings),
        carry_over=tuple(_carry_over(curve, blanks, ends)),
        reporting_limit=definition.results.reporting_limit,
        sample_range=(
            _sample_range(curve, readings, ends) if ControlsInSampleRange.key in definition.limits else None
        ),
    )


def read_back(curve: Curve, responses: Sequence[float | None]) -> list[float | None]:
    """Concentrations of responses; None where there is no response or no concentration."""
    present = [v for v in responses if v is not None]
    found = iter(concentration_of(curve, present)) if present else iter(())
    return [None if v is None else finite(float(next(found))) for v in responses]


def finite(value: float) -> float | None:
    """None for a value that is undefined."""
    return value if math.isfinite(value) else None


def _judged(standard: StandardRecord) -> JudgedStandard:
    return JudgedStandard(
        label=f"{standard.label} ({standard.position})" if standard.position else standard.label,
        role=standard.role,
        level=standard.concentration,
        response=_number(standard.response),
        back_calculated=_number(standard.back_calculated),
        relative_error=_number(standard.relative_error),
        excluded=standard.excluded,
        saturated=standard.saturated,
        key=standard.key,
    )


def _fitted_blank(reading: Measured) -> JudgedStandard:
    """A blank that takes part in the fit: one more level, judged by no relative error."""
    return JudgedStandard(
        label=reading.where,
        role=reading.role,
        level=0.0,
        response=_number(reading.response),
        back_calculated=math.nan,
        relative_error=math.nan,
        excluded=reading.excluded is not None,
        saturated=False,
        key=reading.key,
    )


def _seen_by(curve: Curve, standards: Sequence[JudgedStandard]) -> Iterable[JudgedStandard]:
    """Standards with the curve's response at their level and the variance of the noise model there."""
    if not standards or not np.all(np.isfinite(curve.values)):
        return standards
    levels = np.array([s.level for s in standards])
    fitted = np.asarray(curve.predict(levels), dtype=np.float64)
    variances = np.asarray(curve.noise.variance(fitted, levels), dtype=np.float64)
    return [
        replace(s, fitted_response=float(response), variance=float(variance) if variance > 0 else 1.0)
        for s, response, variance in zip(standards, fitted, variances, strict=True)
    ]


def _checks(curve: Curve, readings: Sequence[Measured]) -> Iterable[JudgedCheck]:
    present = [r for r in readings if r.response is not None]
    for reading, value in zip(present, read_back(curve, [r.response for r in present]), strict=True):
        level = reading.concentration or 0.0
        found = math.nan if value is None else value * reading.dilution
        yield JudgedCheck(reading.where, reading.role, level, found)


def _ends(standards: Iterable[JudgedStandard]) -> tuple[float, float] | None:
    levels = [s.level for s in standards if s.role == "standard" and s.level > 0 and not s.excluded]
    return (min(levels), max(levels)) if levels else None


def _slopes(curve: Curve, ends: tuple[float, float] | None) -> tuple[float, float]:
    if ends is None or not np.all(np.isfinite(curve.values)):
        return math.nan, math.nan
    low, high = (float(curve.response_model.slope(x, curve.values)) for x in ends)
    return low, high


def _counts(readings: Iterable[Measured]) -> dict[str, int]:
    """Readings with a response by role; each sample counts once, however often it was read."""
    present = [r for r in readings if r.response is not None]
    counts = Counter(r.role for r in present if r.role != "unknown")
    return {**counts, "unknown": len({r.sample for r in present if r.role == "unknown"})}


def _carry_over(
    curve: Curve, blanks: Sequence[BlankRecord], ends: tuple[float, float] | None
) -> Iterable[float]:
    """What carry-over blanks answer above zero, as a share of what the lowest standard adds."""
    found = [b.response for b in blanks if b.role == "carry-over" and b.response is not None]
    if not found:
        return
    if ends is None or not np.all(np.isfinite(curve.values)):
        yield from (math.nan for _ in found)
        return
    zero, lowest = (float(curve.predict(x)) for x in (0.0, ends[0]))
    for response in found:
        yield (response - zero) / (lowest - zero) if lowest != zero else math.nan


def _sample_range(
    curve: Curve, readings: Sequence[Measured], ends: tuple[float, float] | None
) -> tuple[float, float] | None:
    """Lowest and highest concentration of the samples' readings, of those inside the calibrated range."""
    found = read_back(curve, [r.response for r in readings if r.role == "unknown"])
    inside = [v for v in found if v is not None and ends is not None and ends[0] <= v <= ends[1]]
    return (min(inside), max(inside)) if inside else None


def _number(value: float | None) -> float:
    return math.nan if value is None else value
