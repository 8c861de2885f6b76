"""Groups of readings of one sample and dilution, quantified on a curve."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from itertools import groupby

import numpy as np

from calib.bench.formed_results import CurveRun, formed
from calib.bench.method_definition import MethodDefinition
from calib.bench.records import Measured, QuantityRecord
from calib.bench.uncertainty_basis import CURVE_ONLY, UncertaintyBasis
from calib.curves.curve import Curve
from calib.quantification.budget import FurtherUncertainty, budget_parts
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
    basis: UncertaintyBasis = CURVE_ONLY,
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
    basis : UncertaintyBasis
        What is known beside reading and curve.
    """
    groups = [tuple(g) for g in _groups(readings)]
    found = _inverted(definition, curve, groups, basis) if curve.converged else {}
    tests = ("check", "first-check")
    found_of_groups = tuple(
        _record(
            definition,
            g,
            # A check is read back on a rejected curve too: it is part of why it was rejected.
            found.get(i) if usable or g[0].role in tests else None,
            lowest,
            highest,
            None if usable else unusable_flag,
        )
        for i, g in enumerate(groups)
    )
    return formed(definition, curve, readings, found_of_groups, highest, of_curve)


@dataclass(frozen=True, slots=True)
class _Found:
    """One unknown among those that were inverted together."""

    curve: Curve
    quantity: Quantity
    i: int
    components: tuple[FurtherUncertainty, ...]


def _inverted(
    definition: MethodDefinition, curve: Curve, groups: Sequence[Sequence[Measured]], basis: UncertaintyBasis
) -> dict[int, _Found]:
    """Unknowns by the place of their group; the diluted ones apart, for they have a component more."""
    present = [i for i, g in enumerate(groups) if any(r.response is not None for r in g)]
    apart = basis.combined and basis.dilution is not None
    diluted = [i for i in present if apart and groups[i][0].dilution != 1.0]
    others = [i for i in present if i not in diluted]
    found: dict[int, _Found] = {}
    for places in (others, diluted):
        if places:
            components = basis.components(curve, diluted=places is diluted)
            quantity = invert(
                curve,
                [_mean(groups[i]) for i in places],
                replicates=[sum(r.response is not None for r in groups[i]) for i in places],
                confidence=definition.interval_confidence,
                components=components,
            )
            found |= {i: _Found(curve, quantity, k, components) for k, i in enumerate(places)}
    return found


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
    group: Sequence[Measured],
    inverted: _Found | None,
    lowest: float | None,
    highest: float | None,
    unusable: str | None,
) -> QuantityRecord:
    one = group[0]
    responses = [r.response for r in group if r.response is not None]
    flags = _reading_flags(group, len(responses))
    if inverted is None:
        cause = unusable if unusable and responses else "no-value"
        return _without_value(definition, one, responses, (*flags, cause))
    found, i = inverted.quantity, inverted.i
    position = _position(float(found.value[i]), found.position[i], lowest, highest)
    flags += _value_flags(found, i, position)
    if unusable:
        flags += (unusable,)
    if len(responses) > 1 and replicates_disagree(inverted.curve, responses):
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
        kind="combined" if inverted.components else "curve only",
        degrees_of_freedom=_finite(found.degrees_of_freedom[i]),
        state=found.state[i],
        position=position,
        flags=flags,
        dilution=one.dilution,
        unit=definition.concentration_unit,
        curve_id=None,
        budget=_budget(inverted, len(responses), one.dilution),
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


def _budget(inverted: _Found, replicates: int, dilution: float) -> dict[str, float]:
    """Standard uncertainty of each component, in the sample's unit; empty where there is no u."""
    found, i = inverted.quantity, inverted.i
    if not np.isfinite(found.u[i]):
        return {}
    parts = budget_parts(
        inverted.curve, found.value[i : i + 1], np.array([float(replicates)]), inverted.components
    )
    return {name: float(u[0]) * dilution for name, u in parts.items()}


def _finite(value: float) -> float | None:
    return float(value) if np.isfinite(value) else None


def _times(value: float | None, dilution: float) -> float | None:
    return None if value is None else value * dilution
