"""Beside a curve: the reading that does not belong, what leaving it out would change, and a robust check."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import replace
from itertools import groupby

import numpy as np

from calib import store as tables
from calib.bench.evaluate import CHECK_ROLES, evaluate, fitted_curve, fitted_readings
from calib.bench.evidence import finite
from calib.bench.method_definition import MethodDefinition
from calib.bench.records import (
    ConcentrationEffect,
    Evaluation,
    Measured,
    NoiseHistory,
    OutlyingProposal,
    RunRecord,
)
from calib.curves.curve import Curve
from calib.curves.outlying import outlying_reading
from calib.errors import InputError
from calib.quantification.inverse import concentration_of
from calib.quantification.range import working_range
from calib.quantification.robust_check import robust_finding

NOISY = "noisy-run"


def evaluate_and_check(
    definition: MethodDefinition, readings: Sequence[Measured], history: NoiseHistory | None = None
) -> Evaluation:
    """Evaluate a run, and look for a reading that does not belong; see `evaluate`.

    One pass over the residuals, and none over a run in which a reading was left out as outlying.
    """
    evaluation = evaluate(definition, readings, history)
    curve = evaluation.curve
    robust = robust_finding(curve)
    if robust is not None:
        curve = replace(curve, findings=(*curve.findings, robust))
        evaluation = replace(evaluation, curve=curve)
    if any(r.outlying is not None for r in readings):
        return evaluation
    return replace(evaluation, outlying=_proposal(definition, readings, evaluation, history))


def refuse_outlying(record: RunRecord, chosen: Sequence[Measured]) -> None:
    """Refuse to leave a reading out as outlying that is not proposed, or a second one.

    Raises
    ------
    InputError
        Saying why, and what there is to do instead.
    """
    number, proposal = record.heading.id, record.evaluation.outlying
    apart = "a reason known apart from the fit is --cause 'assignable cause'"
    for reading in record.readings:
        if reading.outlying == "excluded":
            raise InputError(
                f"{reading.where} of run {number} is left out as outlying already, and one reading at most may be; "
                f"{apart}"
            )
        if reading.outlying == "restored":
            raise InputError(
                f"run {number} is not acceptable: it stayed noisy without {reading.where}; find the cause and "
                "measure again"
            )
    if proposal is None or [r.key for r in chosen] != [proposal.key]:
        which = "no reading" if proposal is None else f"only {proposal.where}"
        raise InputError(
            f"{', '.join(r.where for r in chosen)}: {which} of run {number} is outlying by the studentised "
            f"residuals; {apart}"
        )
    if proposal.last_of_end_level:
        raise InputError(
            f"{proposal.where} is the last reading of an end level of run {number} and stays in; measure the "
            "level again"
        )


def outlying_of(row: tables.Curve) -> OutlyingProposal | None:
    """The reading that was proposed to be left out beside a curve, where one was."""
    if row.outlying is None:
        return None
    effects = tuple(ConcentrationEffect(**effect) for effect in row.outlying["effects"])
    return OutlyingProposal(**(row.outlying | {"effects": effects}))


def stays_noisy(evaluation: Evaluation) -> bool:
    """Whether a run scatters more than its history."""
    return any(f.code == NOISY for f in evaluation.curve.findings)


def _proposal(
    definition: MethodDefinition,
    readings: Sequence[Measured],
    evaluation: Evaluation,
    history: NoiseHistory | None,
) -> OutlyingProposal | None:
    found = outlying_reading(evaluation.curve)
    if found is None:
        return None
    left_out = {s.key for s in evaluation.standards if not s.fitted}
    fitted = [r for r in fitted_readings(definition, readings) if r.key not in left_out]
    reading = fitted[found.index]
    without = fitted_curve(definition, [r for r in fitted if r is not reading], history)
    return OutlyingProposal(
        key=reading.key,
        where=reading.where,
        level=reading.concentration or 0.0,
        studentised=found.studentised,
        limit=found.limit,
        against=found.against,
        last_of_end_level=found.last_of_end_level,
        still_noisy=any(f.code == NOISY for f in without.findings),
        effects=tuple(_effects(definition, readings, evaluation.curve, without)),
    )


def _effects(
    definition: MethodDefinition, readings: Sequence[Measured], curve: Curve, without: Curve
) -> Iterable[ConcentrationEffect]:
    """What levels in the working range and controls read with and without the reading."""
    span = working_range(curve, definition.required_cv)
    levels = np.unique(curve.standards.concentration)
    inside = levels[(levels >= span.lowest) & (levels <= span.highest)]
    yield from _both("level", [""] * inside.size, curve.predict(inside), curve, without)
    controls = [r for r in readings if r.role in ("control", *CHECK_ROLES) and r.response is not None]
    groups = [(name, list(group)) for name, group in groupby(controls, key=lambda r: (r.role, r.sample))]
    means = [float(np.mean([r.response for r in group if r.response is not None])) for _, group in groups]
    yield from _both("control", [name for (_, name), _ in groups], means, curve, without)


def _both(
    kind: str, names: Sequence[str], responses: Sequence[float] | np.ndarray, curve: Curve, without: Curve
) -> Iterable[ConcentrationEffect]:
    if len(responses) == 0:
        return
    pairs = zip(concentration_of(curve, responses), concentration_of(without, responses), strict=True)
    for name, (before, after) in zip(names, pairs, strict=True):
        yield ConcentrationEffect(kind, name, finite(float(before)), finite(float(after)))
