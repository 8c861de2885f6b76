"""Readings and a method in, a curve, a verdict and quantities out; nothing is stored."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from dataclasses import replace

import numpy as np

from calib.acceptance import Evidence, criteria_from, judge
from calib.bench.evidence import evidence_of, read_back
from calib.bench.exclude_failing import evaluate_with_exclusions
from calib.bench.formed_results import curve_run
from calib.bench.method_definition import HISTORY, MethodDefinition
from calib.bench.quantities import quantities_of
from calib.bench.records import (
    BlankRecord,
    Evaluation,
    Measured,
    NoiseHistory,
    StandardRecord,
    VerdictRecord,
)
from calib.bench.uncertainty_basis import UncertaintyBasis
from calib.curves.curve import Curve
from calib.curves.diagnostics import Finding
from calib.curves.fit import fit
from calib.curves.history_noise import HistoryNoise
from calib.curves.own_noise import fit_with_own_noise
from calib.errors import InputError

STANDARD_ROLES = ("standard", "anchor")
BLANK_ROLES = ("blank", "zero", "carry-over")
NOT_ACCEPTABLE = "run-not-acceptable"
CHECK_ROLES = ("check", "first-check")


def evaluate(
    definition: MethodDefinition, readings: Sequence[Measured], history: NoiseHistory | None = None
) -> Evaluation:
    """Fit the standards, judge the curve, and quantify what else was measured.

    Parameters
    ----------
    definition : MethodDefinition
    readings : sequence of Measured
        Of one run, in the method's units.
    history : NoiseHistory, optional
        Where the method takes its noise from its history: what was pooled for this run. Without it
        the variance function is estimated from this run alone, and the curve says so.

    Raises
    ------
    InputError
        When no standard reading is left to fit.
    """
    fitted = fitted_readings(definition, readings)
    if not fitted:
        raise InputError("no standard with a response is left to fit: check the roles, or log it as unknowns")
    return settle(definition, readings, fitted_curve(definition, fitted, history), history)


def fitted_curve(
    definition: MethodDefinition, fitted: Sequence[Measured], history: NoiseHistory | None
) -> Curve:
    """Curve of one run under the noise model its method asks for."""
    x = [r.concentration or 0.0 for r in fitted]
    y = [math.nan if r.response is None else r.response for r in fitted]
    fixed, bounds = definition.fixed, definition.bounds
    if definition.noise != HISTORY:
        return fit(x, y, definition.model, noise=definition.noise, fixed=fixed, bounds=bounds)
    if history is None:
        return fit_with_own_noise(x, y, definition.model, fixed=fixed, bounds=bounds)
    return fit(x, y, definition.model, noise=history.noise, fixed=fixed, bounds=bounds)


def settle(
    definition: MethodDefinition,
    readings: Sequence[Measured],
    curve: Curve,
    history: NoiseHistory | None = None,
) -> Evaluation:
    """Judge and quantify on the first curve, or on what the method's exclusion rule makes of it."""
    curve = _as_decided(curve, readings)
    if definition.exclusion is None:
        return assemble(definition, readings, curve, history)[0]
    return evaluate_with_exclusions(
        definition,
        readings,
        curve,
        lambda kept: fitted_curve(definition, fitted_readings(definition, kept), history),
        lambda kept, found: assemble(definition, kept, found, history),
    )


def _as_decided(curve: Curve, readings: Sequence[Measured]) -> Curve:
    """The curve of a run that stayed noisy without its outlying reading is not acceptable."""
    back = [r.where for r in readings if r.outlying == "restored"]
    if not back:
        return curve
    finding = Finding(
        NOT_ACCEPTABLE,
        f"run not acceptable: without {', '.join(back)}, left out as outlying, it still scattered more than its "
        "history; all readings are back in the fit: find the cause and measure again",
    )
    return replace(curve, findings=(*curve.findings, finding))


def fitted_readings(definition: MethodDefinition, readings: Iterable[Measured]) -> list[Measured]:
    """Readings that take part in the fit."""
    roles = (*STANDARD_ROLES, "blank", "zero") if definition.fit_blank else STANDARD_ROLES
    return [r for r in readings if r.role in roles and r.response is not None and r.excluded is None]


def assemble(
    definition: MethodDefinition,
    readings: Sequence[Measured],
    curve: Curve,
    history: NoiseHistory | None = None,
) -> tuple[Evaluation, Evidence]:
    """Judge and quantify on a curve that is there already; with what the verdict rests on."""
    fitted = {r.key for r in fitted_readings(definition, readings)}
    standards = tuple(_standards(curve, [r for r in readings if r.role in STANDARD_ROLES], fitted))
    blanks = blank_records(curve, readings)
    evidence = evidence_of(definition, readings, curve, standards, blanks)
    verdict = _verdict(definition, evidence)
    others = [r for r in readings if r.role in ("unknown", "control", *CHECK_ROLES)]
    quantities = quantities_of(
        definition,
        curve,
        verdict.accepted,
        others,
        verdict.lowest,
        verdict.highest,
        of_curve=curve_run(readings, verdict.carried_over),
    )
    used = history if isinstance(curve.noise, HistoryNoise) else None
    return Evaluation(curve, standards, blanks, verdict, quantities, history=used), evidence


def with_basis(
    definition: MethodDefinition,
    readings: Sequence[Measured],
    evaluation: Evaluation,
    basis: UncertaintyBasis,
) -> Evaluation:
    """The evaluation with its quantities on a basis; verdict and curve rest on the readings alone."""
    if not basis.combined:
        return replace(evaluation, basis=basis)
    verdict = evaluation.verdict
    others = [r for r in readings if r.role in ("unknown", "control", *CHECK_ROLES)]
    quantities = quantities_of(
        definition,
        evaluation.curve,
        verdict.accepted,
        others,
        verdict.lowest,
        verdict.highest,
        of_curve=curve_run(readings, verdict.carried_over),
        basis=basis,
    )
    return replace(evaluation, quantities=quantities, basis=basis)


def _standards(curve: Curve, readings: Sequence[Measured], fitted: set[int]) -> Iterable[StandardRecord]:
    found = read_back(curve, [r.response for r in readings])
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
    found = read_back(curve, [r.response for r in readings])
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


def _verdict(definition: MethodDefinition, evidence: Evidence) -> VerdictRecord:
    verdict = judge(evidence, criteria_from(definition.limits))
    return VerdictRecord(
        verdict.decision, verdict.criteria, verdict.lowest, verdict.highest, verdict.r_squared
    )
