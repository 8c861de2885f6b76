"""A fitted curve in words: its equation, parameters, and what the residual SD is counted in."""

from __future__ import annotations

import math
from collections.abc import Iterable
from typing import TYPE_CHECKING

from calib.acceptance.wording import signed_percent
from calib.report.wording import LEVEL_DIGITS, MISSING, number, percent, rounded, significant, with_unit

if TYPE_CHECKING:
    from calib.bench.records import Evaluation, NoiseHistory, OutlyingProposal
    from calib.curves.curve import Curve


NOT_IDENTIFIED = "not identified"


def equation(curve: Curve) -> str:
    """Formula of the model, response y against concentration x."""
    return f"y = {curve.response_model.formula}"


def unit_words(unit_of: str, concentration_unit: str, response_unit: str) -> str:
    """Unit of a parameter from the units of concentration and response.

    Examples
    --------
    >>> unit_words("response/concentration", "mg/L", "nA"), unit_words("1/concentration", "mg/L", "nA")
    ('nA/(mg/L)', '1/(mg/L)')
    """
    concentration = f"({concentration_unit})" if "/" in concentration_unit else concentration_unit
    response = f"({response_unit})" if "/" in response_unit else response_unit
    if unit_of in ("response", "concentration"):
        return response_unit if unit_of == "response" else concentration_unit
    return unit_of.replace("response", response).replace("concentration", concentration)


def parameter_rows(
    curve: Curve, concentration_unit: str, response_unit: str
) -> tuple[tuple[str, str, str, str, str], ...]:
    """Name, meaning, value, standard uncertainty and unit of each parameter."""
    errors, fixed = curve.standard_errors, curve.fixed
    rows = []
    for parameter in curve.response_model.parameters:
        value, u = curve.parameters[parameter.name], errors[parameter.name]
        if parameter.name in fixed:
            shown, uncertainty = number(value), "held"
        else:
            shown, uncertainty = _with_u(value, u) if curve.identified else (NOT_IDENTIFIED, MISSING)
        unit = unit_words(parameter.unit_of, concentration_unit, response_unit)
        rows.append((parameter.name, parameter.meaning, shown, uncertainty, unit))
    return tuple(rows)


def _with_u(value: float, u: float) -> tuple[str, str]:
    return rounded(value, u) if math.isfinite(u) else (number(value), "not determined")


def residual_sd_text(curve: Curve, concentration_unit: str, response_unit: str) -> str:
    """Residual standard deviation with what it is a standard deviation of.

    The scale is that of the noise model: a response, a share of it, or a response per power.
    """
    sd, noise = curve.residual_sd, getattr(curve.noise, "function", curve.noise)
    exponent = float(getattr(noise, "exponent", 0.0))
    match noise.kind:
        case "uniform":
            return with_unit(number(sd), response_unit)
        case "power-of-mean" if exponent == 2.0:
            return f"{_percent(sd)} of the response"
        case "additive-relative":
            return f"{_percent(sd)} of a large response"
        case "power-of-mean":
            return (
                f"{number(sd)}, times response^{number(exponent / 2)} (response in {_named(response_unit)})"
            )
        case "power-of-concentration":
            per = f"concentration^{number(exponent / 2)} (concentration in {_named(concentration_unit)})"
            return f"{with_unit(number(sd), response_unit)}, times {per}"
        case _ if noise.known_scale:
            return f"{number(sd)} times the known standard uncertainties"
    return f"{number(sd)} times the given standard deviations"


def history_text(history: NoiseHistory) -> str:
    """Say what a noise model was pooled over.

    For example '320 readings of 20 runs (1–18, 20, 21); power-of-mean, pseudo-likelihood lower by 3.1
    than additive-relative'.
    """
    noise = history.noise
    other = "additive-relative" if noise.family == "power-of-mean" else "power-of-mean"
    return (
        f"{noise.readings} readings of {noise.runs} runs ({spans(p.run for p in history.past)}); {noise.family}, "
        f"pseudo-likelihood lower by {number(noise.difference, 2)} than {other}"
    )


def interval_scale_text(evaluation: Evaluation) -> str:
    """Say which standard deviation the intervals rest on, and with how many degrees of freedom."""
    curve = evaluation.curve
    nu = curve.coverage_freedom
    text = f"{number(curve.scale)}, {'known' if math.isinf(nu) else f'{nu:.0f} degrees of freedom'}"
    if evaluation.history is None:
        return text
    spread = evaluation.history.noise.spread
    if any(f.code == "noisy-run" for f in curve.findings):
        return f"{text}, of this run alone: it scatters more than its history ({number(spread.sd)})"
    return (
        f"{text}: this run's {number(curve.residual_sd)} moderated by its history ({number(spread.sd)}, "
        f"which counts as {spread.weight:.0f} of {spread.degrees_of_freedom:.0f} degrees of freedom)"
    )


def outlying_text(outlying: OutlyingProposal) -> str:
    """Propose a reading to be left out, and say what a person has to decide."""
    found = (
        f"{outlying.where} at level {number(outlying.level, LEVEL_DIGITS)} does not belong to the run: studentised "
        f"residual {outlying.studentised:+.1f}, limit {outlying.limit:.2f}, against {outlying.against}"
    )
    if outlying.last_of_end_level:
        return f"{found}; it is the last reading of an end level and stays in: measure the level again"
    if outlying.still_noisy:
        return f"{found}; without it the run still scatters more than its history: not acceptable, find the cause"
    return (
        f"{found}; proposed to be left out, by a person with a reason (calib run exclude … --cause outlying)"
    )


def effect_rows(outlying: OutlyingProposal) -> tuple[tuple[str, str, str, str], ...]:
    """What is read with and without the reading: level or control, with, without, change."""
    return tuple(
        (
            f"{e.kind} {e.name or number(e.before)}",
            significant(e.before),
            significant(e.after),
            MISSING if e.relative_change is None else signed_percent(e.relative_change, math.inf),
        )
        for e in outlying.effects
    )


def effects_text(outlying: OutlyingProposal) -> str:
    """Say in one line what leaving the reading out would change."""
    changes = [f"{what} {change}" for what, _, _, change in effect_rows(outlying)]
    return (
        f"without it: {', '.join(changes)}" if changes else "without it no level or control is read otherwise"
    )


def spans(numbers: Iterable[int]) -> str:
    """Write whole numbers with runs of neighbours drawn together.

    Examples
    --------
    >>> spans([3, 5, 6, 7, 9, 10])
    '3, 5–7, 9, 10'
    """
    parts: list[list[int]] = []
    for n in sorted(numbers):
        if parts and n == parts[-1][-1] + 1:
            parts[-1].append(n)
        else:
            parts.append([n])
    return ", ".join(f"{p[0]}–{p[-1]}" if len(p) > 2 else ", ".join(map(str, p)) for p in parts)


def _percent(sd: float) -> str:
    """Percent with enough decimals for a small one."""
    text = percent(sd, 2)
    return text if text == MISSING or abs(sd) >= 0.001 else f"{number(100 * sd, 3)} %"


def _named(unit: str) -> str:
    return "units of the response" if unit == "1" else unit
