"""What the rules of a method make of quantities: reporting limit, replicates, brackets, carry-over."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from calib.acceptance.bracketing import Bracket, Injection, brackets
from calib.acceptance.limits import at_least, at_most, within
from calib.bench.evidence import read_back
from calib.bench.method_definition import MethodDefinition
from calib.bench.records import Measured, QuantityRecord
from calib.curves.curve import Curve

CHECKS = {"check": "check_recovery", "first-check": "first_check_recovery"}
SampleKey = tuple[str, str, float, float]  # role, sample, dilution, nominal concentration


@dataclass(frozen=True, slots=True)
class CurveRun:
    """What the run of a curve says about the samples read on it.

    Attributes
    ----------
    carried_over : bool
        Its carry-over blank did not keep its limit, and the samples are of the same run.
    internal_standard : float or None
        Mean response of the internal standard in its standards.
    """

    carried_over: bool = False
    internal_standard: float | None = None


def curve_run(readings: Sequence[Measured], carried_over: bool = False) -> CurveRun:
    """What the readings of the curve's own run say about the samples read on it."""
    found = [
        r.internal_standard for r in readings if r.role == "standard" and r.internal_standard is not None
    ]
    return CurveRun(carried_over, float(np.mean(found)) if found else None)


def formed(
    definition: MethodDefinition,
    curve: Curve,
    readings: Sequence[Measured],
    quantities: Sequence[QuantityRecord],
    highest: float | None,
    of_curve: CurveRun,
) -> tuple[QuantityRecord, ...]:
    """Quantities with what the method's rules on results, checks and carry-over make of them.

    Parameters
    ----------
    definition : MethodDefinition
    curve : Curve
        The curve they were read on.
    readings : sequence of Measured
        Samples, checks and controls of their run, in the order of the file.
    quantities : sequence of QuantityRecord
    highest : float or None
        Highest standard in force.
    of_curve : CurveRun
        What the run of the curve says about its samples.
    """
    by_sample: dict[SampleKey, list[Measured]] = {}
    for reading in readings:
        by_sample.setdefault(_key_of_reading(reading), []).append(reading)
    around = _brackets(definition, curve, readings) if definition.checks.bracket else {}
    risky = _after_a_high_one(curve, readings, highest) if of_curve.carried_over else frozenset()
    return tuple(
        _formed(definition, q, by_sample.get(_key(q), []), around, risky, of_curve.internal_standard)
        if q.role == "unknown"
        else q
        for q in quantities
    )


def in_sequence(readings: Sequence[Measured]) -> list[Measured]:
    """Readings in the order of measurement: by injection number where each has one, else as in the file."""
    numbers = [r.position for r in readings]
    if all(n is not None and n.isdigit() for n in numbers):
        return sorted(readings, key=lambda r: int(r.position or 0))
    return list(readings)


def _key(q: QuantityRecord) -> SampleKey:
    return q.role, q.sample, q.dilution, q.nominal or 0.0


def _key_of_reading(r: Measured) -> SampleKey:
    return r.role, r.sample, r.dilution, r.concentration or 0.0


def _formed(
    definition: MethodDefinition,
    q: QuantityRecord,
    readings: Sequence[Measured],
    around: Mapping[int, Bracket],
    risky: frozenset[int],
    internal_standard: float | None,
) -> QuantityRecord:
    flags = list(q.flags)
    rules = definition.results
    q = _censored(q, rules.reporting_limit, flags)
    if 0 < q.replicates < rules.minimum_replicates:
        flags.append("too-few-replicates")
    if rules.replicate_cv is not None and not within(_cv(readings), rules.replicate_cv) and q.replicates > 1:
        flags.append("replicate-cv")
    open_brackets = [around[r.key] for r in readings if r.key in around and not around[r.key].closed]
    if open_brackets:
        flags.append(_bracket_flag(definition, q, open_brackets))
    if any(r.key in risky for r in readings):
        flags.append("carry-over-risk")
    if rules.internal_standard and not _internal_standard_kept(
        readings, rules.internal_standard, internal_standard
    ):
        flags.append("internal-standard")
    return replace(q, flags=tuple(flags))


def _censored(q: QuantityRecord, limit: float | None, flags: list[str]) -> QuantityRecord:
    """Below the reporting limit, which scales with the dilution, the value is kept and not reported."""
    if limit is None or q.concentration is None or q.concentration / q.dilution >= limit:
        return q
    flags.append("below-reporting-limit")
    return replace(q, concentration=None, estimate=q.concentration, position="below")


def _internal_standard_kept(
    readings: Sequence[Measured], limits: tuple[float, float], mean: float | None
) -> bool:
    """Whether the internal standard of every reading keeps its limits; a reading without one does not."""
    low, high = limits
    return all(
        mean is not None
        and r.internal_standard is not None
        and at_least(r.internal_standard / mean, low)
        and at_most(r.internal_standard / mean, high)
        for r in readings
        if r.response is not None
    )


def _cv(readings: Sequence[Measured]) -> float:
    """Coefficient of variation of the responses, a fraction."""
    found = np.array([r.response for r in readings if r.response is not None])
    if found.size < 2 or not found.mean():
        return math.nan
    return float(found.std(ddof=1) / abs(found.mean()))


def _bracket_flag(definition: MethodDefinition, q: QuantityRecord, found: Sequence[Bracket]) -> str:
    kept = definition.checks.keep_high_bias_non_detects and q.position == "below"
    return "high-bias-kept" if kept and all(b.failed_high for b in found) else "not-bracketed"


def _brackets(definition: MethodDefinition, curve: Curve, readings: Sequence[Measured]) -> dict[int, Bracket]:
    ordered = in_sequence(readings)
    found = read_back(curve, [r.response for r in ordered])
    sequence = [_injection(definition, r, v) for r, v in zip(ordered, found, strict=True)]
    return brackets(sequence, definition.checks.every)


def _injection(definition: MethodDefinition, reading: Measured, found: float | None) -> Injection:
    if reading.role not in CHECKS:
        return Injection(reading.key, "sample" if reading.role == "unknown" else "other")
    limit = definition.limits.get(CHECKS[reading.role]) or definition.limits["check_recovery"]
    level = reading.concentration or 0.0
    deviation = math.nan if found is None or not level else found * reading.dilution / level - 1.0
    return Injection(reading.key, "check", deviation, within(deviation, limit.value))


def _after_a_high_one(curve: Curve, readings: Sequence[Measured], highest: float | None) -> frozenset[int]:
    """Readings measured after one above the highest standard, with no other sample or check between."""
    ordered = in_sequence(readings)
    found = read_back(curve, [r.response for r in ordered])
    high = [
        r.role == "unknown" and (r.saturated or (v is not None and highest is not None and v > highest))
        for r, v in zip(ordered, found, strict=True)
    ]
    return frozenset(
        later.key
        for was_high, earlier, later in zip(high, ordered, ordered[1:], strict=False)
        if was_high and later.sample != earlier.sample
    )
