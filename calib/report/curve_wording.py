"""A fitted curve in words: its equation, parameters, and what the residual SD is counted in."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

from calib.report.wording import MISSING, number, percent, rounded, with_unit

if TYPE_CHECKING:
    from calib.curves.curve import Curve


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
        shown, uncertainty = (number(value), "held") if parameter.name in fixed else _with_u(value, u)
        unit = unit_words(parameter.unit_of, concentration_unit, response_unit)
        rows.append((parameter.name, parameter.meaning, shown, uncertainty, unit))
    return tuple(rows)


def _with_u(value: float, u: float) -> tuple[str, str]:
    return rounded(value, u) if math.isfinite(u) else (number(value), "not determined")


def residual_sd_text(curve: Curve, concentration_unit: str, response_unit: str) -> str:
    """Residual standard deviation with what it is a standard deviation of.

    The scale is that of the noise model: a response, a share of it, or a response per power.
    """
    sd, noise = curve.residual_sd, curve.noise
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


def _percent(sd: float) -> str:
    """Percent with enough decimals for a small one."""
    text = percent(sd, 2)
    return text if text == MISSING or abs(sd) >= 0.001 else f"{number(100 * sd, 3)} %"


def _named(unit: str) -> str:
    return "units of the response" if unit == "1" else unit
