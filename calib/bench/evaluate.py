"""Readings and a method in, a curve, a verdict and quantities out; nothing is stored."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence

import numpy as np

from calib.acceptance import Evidence, JudgedCheck, JudgedStandard, criteria_from, judge
from calib.bench.method_definition import MethodDefinition
from calib.bench.quantities import quantities_of
from calib.bench.records import BlankRecord, Evaluation, Measured, StandardRecord, VerdictRecord
from calib.curves.curve import Curve
from calib.curves.fit import fit
from calib.errors import InputError
from calib.quantification.inverse import concentration_of

STANDARD_ROLES = ("standard", "anchor")
BLANK_ROLES = ("blank", "zero", "carry-over")
CHECK_ROLES = ("check", "first-check")


def evaluate(definition: MethodDefinition, readings: Sequence[Measured]) -> Evaluation:
    """Fit the standards, judge the curve, and quantify what else was measured.

    Parameters
    ----------
    definition : MethodDefinition
    readings : sequence of Measured
        Of one run, in the method's units.

    Raises
    ------
    InputError
        When no standard reading is left to fit.
    """
    fitted = fitted_readings(definition, readings)
    if not fitted:
        raise InputError("no standard with a response is left to fit: check the roles, or log it as unknowns")
    curve = fit(
        [r.concentration or 0.0 for r in fitted],
        [math.nan if r.response is None else r.response for r in fitted],
        model=definition.model,
        noise=definition.noise,
        fixed=definition.fixed,
        bounds=definition.bounds,
    )
    return assemble(definition, readings, curve)


def fitted_readings(definition: MethodDefinition, readings: Iterable[Measured]) -> list[Measured]:
    """Readings that take part in the fit."""
    roles = (*STANDARD_ROLES, "blank", "zero") if definition.fit_blank else STANDARD_ROLES
    return [r for r in readings if r.role in roles and r.response is not None and r.excluded is None]


def assemble(definition: MethodDefinition, readings: Sequence[Measured], curve: Curve) -> Evaluation:
    """Judge and quantify on a curve that is there already."""
    fitted = {r.key for r in fitted_readings(definition, readings)}
    standards = tuple(_standards(curve, [r for r in readings if r.role in STANDARD_ROLES], fitted))
    blanks = blank_records(curve, readings)
    verdict = _verdict(definition, readings, curve, standards, blanks)
    others = [r for r in readings if r.role in ("unknown", "control", *CHECK_ROLES)]
    quantities = quantities_of(definition, curve, verdict.accepted, others, verdict.lowest, verdict.highest)
    return Evaluation(curve, standards, blanks, verdict, quantities)


def _read_back(curve: Curve, responses: Sequence[float | None]) -> list[float | None]:
    """Concentrations of responses; None where there is no response or no concentration."""
    present = [v for v in responses if v is not None]
    found = iter(concentration_of(curve, present)) if present else iter(())
    return [None if v is None else finite(float(next(found))) for v in responses]


def finite(value: float) -> float | None:
    """None for a value that is undefined."""
    return value if math.isfinite(value) else None


def _standards(curve: Curve, readings: Sequence[Measured], fitted: set[int]) -> Iterable[StandardRecord]:
    found = _read_back(curve, [r.response for r in readings])
    for reading, value in zip(readings, found, strict=True):
        level = reading.concentration or 0.0
        yield StandardRecord(
            key=reading.key,
            label=reading.sample,
            role=reading.role,
            position=reading.position,
            concentration=level,
            response=reading.response,
            absent_cause=reading.absent_cause,
            fitted=reading.key in fitted,
            back_calculated=value,
            relative_error=value / level - 1.0 if value is not None and level > 0 else None,
            excluded=reading.excluded is not None,
            reason=reading.excluded,
            saturated=reading.saturated,
        )


def blank_records(curve: Curve, readings: Sequence[Measured]) -> tuple[BlankRecord, ...]:
    """Blanks as the curve reads them."""
    return tuple(_blanks(curve, [r for r in readings if r.role in BLANK_ROLES]))


def _blanks(curve: Curve, readings: Sequence[Measured]) -> Iterable[BlankRecord]:
    found = _read_back(curve, [r.response for r in readings])
    for reading, value in zip(readings, found, strict=True):
        if value is None and reading.response is not None and _below_zero_response(curve, reading.response):
            value = 0.0
        yield BlankRecord(
            reading.sample, reading.role, reading.position, reading.response, reading.absent_cause, value
        )


def _below_zero_response(curve: Curve, response: float) -> bool:
    """Whether a response lies on the far side of the response at concentration zero."""
    zero = curve.response_model.limit_at_zero(curve.values)
    if zero is None or not np.all(np.isfinite(curve.values)):
        return False
    top = float(curve.predict(curve.standards.highest))
    return (response - zero.response) * (top - zero.response) <= 0


def _verdict(
    definition: MethodDefinition,
    readings: Sequence[Measured],
    curve: Curve,
    standards: Sequence[StandardRecord],
    blanks: Sequence[BlankRecord],
) -> VerdictRecord:
    evidence = Evidence(
        standards=tuple(_judged(s) for s in standards if s.response is not None or s.saturated),
        checks=tuple(_checks(curve, [r for r in readings if r.role in CHECK_ROLES])),
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
    )
    verdict = judge(evidence, criteria_from(definition.limits))
    return VerdictRecord(
        verdict.decision, verdict.criteria, verdict.lowest, verdict.highest, verdict.r_squared
    )


def _judged(standard: StandardRecord) -> JudgedStandard:
    return JudgedStandard(
        label=f"{standard.label} ({standard.position})" if standard.position else standard.label,
        role=standard.role,
        level=standard.concentration,
        response=math.nan if standard.response is None else standard.response,
        back_calculated=math.nan if standard.back_calculated is None else standard.back_calculated,
        relative_error=math.nan if standard.relative_error is None else standard.relative_error,
        excluded=standard.excluded,
        saturated=standard.saturated,
    )


def _checks(curve: Curve, readings: Sequence[Measured]) -> Iterable[JudgedCheck]:
    present = [r for r in readings if r.response is not None]
    for reading, value in zip(present, _read_back(curve, [r.response for r in present]), strict=True):
        level = reading.concentration or 0.0
        yield JudgedCheck(reading.where, reading.role, level, math.nan if value is None else value)
