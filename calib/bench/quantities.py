"""Groups of readings of one sample and dilution, quantified on a curve."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from itertools import groupby

import numpy as np

from calib.bench.formed_results import CurveRun, formed
from calib.bench.method_definition import MethodDefinition
from calib.bench.records import Measured, QuantityRecord
from calib.curves.curve import Curve
from calib.quantification.inverse import Quantity, invert
from calib.quantification.replicates import replicates_disagree

NOTHING_KNOWN = CurveRun()


def quantities_of(
    definition: MethodDefinition,
    curve: Curve,
    usable: bool,
    readings: Sequence[Measured],
    lowest: float | None,
    highest: float | None,
    unusable_flag: str = "curve-rejected",
    of_curve: CurveRun = NOTHING_KNOWN,
) -> tuple[QuantityRecord, ...]:
    """Quantify samples: responses of one sample and dilution are averaged, then inverted.

    The rules of the method on results and checks are applied to what comes out.

    Parameters
    ----------
    definition : MethodDefinition
    curve : Curve
    usable : bool
        Whether the curve was accepted; otherwise no concentration is given.
    readings : sequence of Measured
        Unknowns, controls and checks.
    lowest, highest : float or None
        Calibrated range in force.
    unusable_flag : str
        Flag of a quantity without a concentration when the curve is not usable.
    of_curve : CurveRun
        What the run of the curve says about its samples.
    """
    groups = [tuple(g) for g in _groups(readings)]
    present = [g for g in groups if any(r.response is not None for r in g)]
    found: Quantity | None = None
    if present and curve.converged:
        found = invert(
            curve,
            [_mean(g) for g in present],
            replicates=[sum(r.response is not None for r in g) for g in present],
            confidence=definition.interval_confidence,
        )
    order = {id(g): i for i, g in enumerate(present)}
    tests = ("check", "first-check")
    found_of_groups = tuple(
        _record(
            definition,
            curve,
            g,
            # A check is read back on a rejected curve too: it is part of why it was rejected.
            found if usable or g[0].role in tests else None,
            order.get(id(g)),
            lowest,
            highest,
            None if usable else unusable_flag,
        )
        for g in groups
    )
    return formed(definition, curve, readings, found_of_groups, highest, of_curve)


def _groups(readings: Sequence[Measured]) -> Iterable[Iterable[Measured]]:
    """Readings of one role, sample, nominal value and dilution, in the order of first appearance."""

    def key(r: Measured) -> tuple[str, str, float, float]:
        return r.role, r.sample, r.dilution, r.concentration or 0.0

    first: dict[tuple[str, str, float, float], int] = {}
    for reading in readings:
        first.setdefault(key(reading), len(first))
    ordered = sorted(readings, key=lambda r: first[key(r)])
    return (list(group) for _, group in groupby(ordered, key))


def _mean(group: Sequence[Measured]) -> float:
    return float(np.mean([r.response for r in group if r.response is not None]))


def _record(
    definition: MethodDefinition,
    curve: Curve,
    group: Sequence[Measured],
    found: Quantity | None,
    i: int | None,
    lowest: float | None,
    highest: float | None,
    unusable: str | None,
) -> QuantityRecord:
    one = group[0]
    responses = [r.response for r in group if r.response is not None]
    flags = _reading_flags(group, len(responses))
    if found is None or i is None:
        cause = unusable if unusable and responses else "no-value"
        return _without_value(definition, one, responses, (*flags, cause))
    position = _position(float(found.value[i]), found.position[i], lowest, highest)
    flags += _value_flags(found, i, position)
    if unusable:
        flags += (unusable,)
    if len(responses) > 1 and replicates_disagree(curve, responses):
        flags += ("replicate-spread",)
    value, inside = _finite(found.value[i]), position == "inside"
    return QuantityRecord(
        sample=one.sample,
        role=one.role,
        nominal=one.concentration,
        replicates=len(responses),
        mean_response=float(np.mean(responses)),
        concentration=_times(value, one.dilution) if inside else None,
        estimate=None if inside else _times(value, one.dilution),
        u=_times(_finite(found.u[i]), one.dilution),
        k=_finite(found.k[i]),
        expanded=_times(_finite(found.expanded[i]), one.dilution),
        lower=_times(_finite(found.lower[i]), one.dilution),
        upper=_times(_finite(found.upper[i]), one.dilution),
        upper_open=bool(np.isinf(found.upper[i])),
        confidence=definition.interval_confidence,
        kind="curve only",
        degrees_of_freedom=_finite(found.degrees_of_freedom[i]),
        state=found.state[i],
        position=position,
        flags=flags,
        dilution=one.dilution,
        unit=definition.concentration_unit,
        curve_id=None,
        budget=_budget(curve, found, i, len(responses), one.dilution),
    )


def _without_value(
    definition: MethodDefinition, one: Measured, responses: Sequence[float], flags: tuple[str, ...]
) -> QuantityRecord:
    return QuantityRecord(
        sample=one.sample,
        role=one.role,
        nominal=one.concentration,
        replicates=len(responses),
        mean_response=float(np.mean(responses)) if responses else None,
        concentration=None,
        estimate=None,
        u=None,
        k=None,
        expanded=None,
        lower=None,
        upper=None,
        upper_open=False,
        confidence=definition.interval_confidence,
        kind="curve only",
        degrees_of_freedom=None,
        state="no-estimate",
        position=None,
        flags=flags,
        dilution=one.dilution,
        unit=definition.concentration_unit,
        curve_id=None,
        budget={},
    )


def _reading_flags(group: Sequence[Measured], present: int) -> tuple[str, ...]:
    flags = []
    if any(r.saturated for r in group):
        flags.append("saturated")
    if present < len(group):
        flags.append("absent-reading")
    return tuple(flags)


def _value_flags(found: Quantity, i: int, position: str) -> tuple[str, ...]:
    flags = []
    if position != "inside":
        # Nothing about the interval is reported outside the range, so nothing is flagged about it.
        return (f"{position}-range", *(("off-curve",) if found.state[i] == "off-curve" else ()))
    match found.state[i]:
        case "asymmetric":
            flags.append("lopsided")
        case "open-above" | "open-below":
            flags.append("one-sided")
        case "no-estimate":
            flags.append("no-value")
        case "off-curve":
            flags.append("off-curve")
    if found.second_region[i]:
        flags.append("second-region")
    return tuple(flags)


def _position(value: float, by_response: str, lowest: float | None, highest: float | None) -> str:
    """Position against the calibrated range in force, which excludes anchors."""
    if not np.isfinite(value) or lowest is None or highest is None:
        return by_response
    return "above" if value > highest else "below" if value < lowest else "inside"


def _budget(curve: Curve, found: Quantity, i: int, replicates: int, dilution: float) -> dict[str, float]:
    """Standard uncertainties of the two parts of a curve-only budget, in the sample's unit."""
    x = float(found.value[i])
    if not (np.isfinite(x) and np.isfinite(found.u[i])):
        return {}
    slope = abs(float(curve.response_model.slope(x, curve.values)))
    reading = float(np.sqrt(curve.reading_variance(x) / replicates)) / slope
    own = float(np.sqrt(curve.fit_variance(x))) / slope
    return {"repeatability of the reading": reading * dilution, "curve": own * dilution}


def _finite(value: float) -> float | None:
    return float(value) if np.isfinite(value) else None


def _times(value: float | None, dilution: float) -> float | None:
    return None if value is None else value * dilution
