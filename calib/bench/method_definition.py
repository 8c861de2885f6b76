"""A method as its TOML text defines it, read and validated."""

from __future__ import annotations

import math
import tomllib
from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np

from calib.acceptance import ExclusionRule, Limit
from calib.bench.acceptance_settings import acceptance_limits
from calib.bench.budget_settings import BudgetSettings, budget_settings
from calib.bench.durations import hours_of
from calib.bench.exclusion_settings import exclusion_rule
from calib.bench.result_settings import (
    CheckRules,
    ResultRules,
    check_rules,
    result_rules,
    specification_of,
)
from calib.bench.setting_lines import line_of
from calib.curves.noise import NoiseModel, assumed_noise
from calib.curves.requests import NOISE_NAMES, problem_of
from calib.curves.standards import Standards
from calib.errors import InputError, MethodError, ModelError, UnknownUnit
from calib.intake import parse_concentration_unit
from calib.models import ResponseModel, response_model
from calib.quantification.specification import Specification
from calib.store.instruments import EVENT_KINDS

REQUIRED = ("name", "analyte", "concentration_unit", "response_unit", "model", "acceptance")
OPTIONAL = (
    "fixed",
    "bounds",
    "noise",
    "interval_confidence",
    "fit_blank",
    "reference_concentrations",
    "required_cv",
    "curve",
    "exclusion",
    "results",
    "checks",
    "specification",
    "budget",
)
# Noise pooled over past runs; the only name that `calib.fit` does not know.
HISTORY = "history"
# 42 CFR 493.1255(b)(3) and ISO/IEC 17025:2017, 6.4.10: what may change the response of an instrument.
NEED_A_CHECK = ("maintenance", "part", "move", "software", "lot")


@dataclass(frozen=True, slots=True)
class MethodDefinition:
    """What a method prescribes.

    Attributes
    ----------
    fixed, bounds : mapping
        Of the model's parameters, by name.
    noise : str or NoiseModel
        A name of `calib.fit`, or 'history'.
    limits : mapping of str to Limit
        Preset limits overridden by the method's own.
    reference_concentrations : tuple of float
        Low, middle and high concentration of the drift review; empty: taken from the standards.
    required_cv : float
        Coefficient of variation that bounds the working range, a fraction.
    valid_hours : float
        How long a curve stays in force.
    needs_check_after : tuple of str
        Kinds of event after which a curve is used only once a check standard passed.
    exclusion : ExclusionRule or None
        How failing standards are left out; None where the method does not ask for it.
    results : ResultRules
    checks : CheckRules
    specification : Specification or None
        What results are compared with; None where the method makes no statement.
    budget : BudgetSettings
        Uncertainties of dilution and of preparing a level.
    """

    name: str
    analyte: str
    concentration_unit: str
    response_unit: str
    model: str
    fixed: Mapping[str, float]
    bounds: Mapping[str, tuple[float, float]]
    noise: str | NoiseModel
    interval_confidence: float
    fit_blank: bool
    reference_concentrations: tuple[float, ...]
    required_cv: float
    preset: str
    limits: Mapping[str, Limit]
    valid_hours: float
    needs_check_after: tuple[str, ...]
    exclusion: ExclusionRule | None
    results: ResultRules
    checks: CheckRules
    specification: Specification | None
    budget: BudgetSettings = field(default_factory=BudgetSettings)


def read_definition(text: str, version: int = 1, preset: str | None = None) -> MethodDefinition:
    """Read and validate the TOML text of a method.

    Parameters
    ----------
    text : str
    version : int
        Named as the source of the limits the method sets itself.
    preset : str, optional
        Text of the preset as it was when the method was added; the one of this calib where left out.

    Raises
    ------
    MethodError
        Naming line, key, value and what is allowed.
    """
    try:
        table = tomllib.loads(text)
    except tomllib.TOMLDecodeError as cause:
        raise MethodError(f"the method is not readable as TOML: {cause}; correct the text") from cause
    try:
        return _definition(table, version, preset)
    except MethodError as wrong:
        line = line_of(text, wrong.key)
        raise MethodError(f"line {line}: {wrong}" if line else str(wrong), wrong.key) from wrong
    except UnknownUnit as unknown:
        line = line_of(text, "concentration_unit")
        raise UnknownUnit(f"line {line}: concentration_unit: {unknown}") from unknown


def _definition(table: Mapping[str, Any], version: int, preset: str | None) -> MethodDefinition:
    _check_keys(table)
    name = _text(table, "name")
    model = _model(_text(table, "model"))
    fixed = _numbers_of(table.get("fixed", {}), "fixed", model)
    bounds = _bounds(table.get("bounds", {}), model)
    _refuse_unfittable(model, fixed, bounds)
    unit = parse_concentration_unit(_text(table, "concentration_unit"))
    own_source = f"method {name} version {version}"
    limits = acceptance_limits(table["acceptance"], own_source, unit, model.name, preset)
    checks = check_rules(table.get("checks"), limits)
    if checks.bracket:
        # A failing check then costs the samples around it, not the curve.
        limits["check_recovery"] = replace(limits["check_recovery"], warns=True)
    return MethodDefinition(
        name=name,
        analyte=_text(table, "analyte"),
        concentration_unit=unit,
        response_unit=_text(table, "response_unit"),
        model=model.name,
        fixed=fixed,
        bounds=bounds,
        noise=_noise(table.get("noise", "uniform")),
        interval_confidence=_between(table, "interval_confidence", 0.95, 0.5, 0.9999),
        fit_blank=_switch(table, "fit_blank"),
        reference_concentrations=_references(table.get("reference_concentrations", [])),
        required_cv=_between(table, "required_cv", 0.2, 0.001, 1.0),
        preset=str(table["acceptance"]["preset"]),
        limits=limits,
        valid_hours=_valid_hours(table.get("curve", {})),
        needs_check_after=_needs_check_after(table.get("curve", {})),
        exclusion=exclusion_rule(table.get("exclusion"), limits),
        results=result_rules(table.get("results"), unit),
        checks=checks,
        specification=specification_of(table.get("specification"), unit),
        budget=budget_settings(table.get("budget")),
    )


def _check_keys(table: Mapping[str, Any]) -> None:
    for key in table:
        if key not in (*REQUIRED, *OPTIONAL):
            raise MethodError(
                f"unknown key '{key}' in the method; known are {', '.join((*REQUIRED, *OPTIONAL))}", key
            )
    for key in REQUIRED:
        if key not in table:
            raise MethodError(f"the method lacks '{key}'; add it")


def _text(table: Mapping[str, Any], key: str) -> str:
    value = table[key]
    if not isinstance(value, str) or not value.strip():
        raise MethodError(f"{key} = {value!r} must be text in quotes", key)
    return value.strip()


def _model(name: str) -> ResponseModel:
    try:
        return response_model(name)
    except ModelError as unknown:
        raise MethodError(f"model: {unknown}", "model") from unknown


def _number(value: object, key: str) -> float:
    if isinstance(value, bool) or not isinstance(value, int | float) or not math.isfinite(value):
        raise MethodError(f"{key} = {value!r} must be a finite number", key)
    return float(value)


def _between(table: Mapping[str, Any], key: str, default: float, low: float, high: float) -> float:
    value = _number(table.get(key, default), key)
    if not low <= value <= high:
        raise MethodError(f"{key} = {value:g} must lie between {low:g} and {high:g}", key)
    return value


def _switch(table: Mapping[str, Any], key: str) -> bool:
    value = table.get(key, False)
    if not isinstance(value, bool):
        raise MethodError(f"{key} = {value!r} must be true or false", key)
    return value


def _parameters(table: object, key: str, model: ResponseModel) -> Mapping[str, Any]:
    if not isinstance(table, Mapping):
        raise MethodError(f"{key} must be a table such as {key} = {{ {model.names[0]} = … }}", key)
    for name in table:
        if name not in model.names:
            raise MethodError(
                f"{key}.{name}: model '{model.name}' has no such parameter; it has {', '.join(model.names)}",
                f"{key}.{name}",
            )
    return table


def _numbers_of(table: object, key: str, model: ResponseModel) -> dict[str, float]:
    return {n: _number(v, f"{key}.{n}") for n, v in _parameters(table, key, model).items()}


def _bounds(table: object, model: ResponseModel) -> dict[str, tuple[float, float]]:
    bounds = {}
    for name, pair in _parameters(table, "bounds", model).items():
        if not isinstance(pair, list) or len(pair) != 2:
            raise MethodError(f"bounds.{name} = {pair!r} must be [lower, upper]", f"bounds.{name}")
        low, high = (_number(v, f"bounds.{name}") for v in pair)
        if not low < high:
            raise MethodError(
                f"bounds.{name} = [{low:g}, {high:g}]: the lower bound must be below the upper",
                f"bounds.{name}",
            )
        bounds[name] = (low, high)
    return bounds


def _refuse_unfittable(
    model: ResponseModel, fixed: Mapping[str, float], bounds: Mapping[str, tuple[float, float]]
) -> None:
    """Refuse settings under which no run could ever be fitted."""
    both = sorted(set(fixed) & set(bounds))
    if both:
        raise MethodError(f"{both[0]} is fixed and has bounds; keep one of the two", f"bounds.{both[0]}")
    levels = np.geomspace(1.0, 100.0, 8)
    try:
        problem_of(model, Standards(levels, levels), fixed, bounds, {})
    except ModelError as cause:
        raise MethodError(f"fixed and bounds: {cause}", "bounds" if bounds else "fixed") from cause


def _noise(value: object) -> str | NoiseModel:
    if isinstance(value, str):
        known = (*NOISE_NAMES, HISTORY)
        if value not in known:
            raise MethodError(f"noise = {value!r} is unknown; known are {', '.join(known)}", "noise")
        return value
    if not isinstance(value, Mapping) or "assumed" not in value or set(value) - {"assumed", "exponent"}:
        raise MethodError('noise must be a name or { assumed = "response", exponent = 2.0 }', "noise")
    return assumed_noise(str(value["assumed"]), _number(value.get("exponent", 2.0), "noise.exponent"))


def _references(value: object) -> tuple[float, ...]:
    if value == []:
        return ()
    if not isinstance(value, list) or len(value) != 3:
        raise MethodError(
            f"reference_concentrations = {value!r} must be [low, middle, high]", "reference_concentrations"
        )
    low, middle, high = (_number(v, "reference_concentrations") for v in value)
    if not 0 < low < middle < high:
        raise MethodError("reference_concentrations must rise and lie above 0", "reference_concentrations")
    return low, middle, high


def _valid_hours(table: object) -> float:
    if not isinstance(table, Mapping) or set(table) - {"valid_for", "needs_check_after"}:
        raise MethodError(
            '[curve] knows the keys valid_for, such as valid_for = "24 h", and needs_check_after', "curve"
        )
    try:
        return hours_of(table.get("valid_for", "24 h"), "curve.valid_for")
    except InputError as cause:
        raise MethodError(str(cause), "curve.valid_for") from cause


def _needs_check_after(table: Mapping[str, Any]) -> tuple[str, ...]:
    kinds = table.get("needs_check_after", list(NEED_A_CHECK))
    if not isinstance(kinds, list) or any(kind not in EVENT_KINDS for kind in kinds):
        raise MethodError(
            f"curve.needs_check_after = {kinds!r} must be a list of kinds of event: {', '.join(EVENT_KINDS)}",
            "curve.needs_check_after",
        )
    return tuple(kinds)
