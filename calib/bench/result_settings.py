"""The [results], [checks] and [specification] tables of a method: how results are formed and released."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from calib.acceptance import ratio_of
from calib.acceptance.dilutions import COUNTING, LEAST_DILUTED
from calib.bench.amounts import amount_in
from calib.errors import InputError, MethodError
from calib.quantification.specification import DECISION_RULES, Specification

RESULT_KEYS = (
    "reporting_limit",
    "minimum_replicates",
    "replicate_cv",
    "dilution_agreement",
    "which_dilution",
    "internal_standard",
)
CHECK_KEYS = ("bracket", "every", "keep_high_bias_non_detects")
SPECIFICATION_KEYS = ("lower", "upper", "decision_rule", "guard_band")


@dataclass(frozen=True, slots=True)
class ResultRules:
    """How results are formed.

    Attributes
    ----------
    reporting_limit : float or None
        Lowest concentration reported, undiluted; it scales with the dilution.
    minimum_replicates : int
        Readings a result needs.
    replicate_cv : float or None
        Largest coefficient of variation of the responses of one sample, a fraction.
    dilution_agreement : float or None
        Largest relative spread of one sample over its dilutions, a fraction.
    which_dilution : str
        Which of several agreeing dilutions counts: 'least diluted' or 'mean'.
    internal_standard : tuple of float, or None
        Least and largest response of the internal standard in a sample, as a share of its mean in the standards.
    """

    reporting_limit: float | None = None
    minimum_replicates: int = 1
    replicate_cv: float | None = None
    dilution_agreement: float | None = None
    which_dilution: str = LEAST_DILUTED
    internal_standard: tuple[float, float] | None = None


@dataclass(frozen=True, slots=True)
class CheckRules:
    """How check standards stand around the samples.

    Attributes
    ----------
    bracket : bool
        A sample counts only between two passing check standards.
    every : int or None
        Samples at most between two checks.
    keep_high_bias_non_detects : bool
        A sample below the range stays, with a flag, where the checks around it failed high.
    """

    bracket: bool = False
    every: int | None = None
    keep_high_bias_non_detects: bool = False


def result_rules(table: object, unit: str) -> ResultRules:
    """Read the [results] table.

    Raises
    ------
    MethodError
        For an unknown key or an impossible value; a reporting limit needs its unit.
    """
    found = _table(table, "results", RESULT_KEYS)
    limit = found.get("reporting_limit")
    which = found.get("which_dilution", LEAST_DILUTED)
    if which not in COUNTING:
        raise MethodError(
            f"results.which_dilution = {which!r} is unknown; known are {', '.join(COUNTING)}",
            "results.which_dilution",
        )
    return ResultRules(
        reporting_limit=None if limit is None else _above_zero(limit, unit, "results.reporting_limit"),
        minimum_replicates=_count(found, "results", "minimum_replicates") or 1,
        replicate_cv=_fraction(found, "replicate_cv"),
        dilution_agreement=_fraction(found, "dilution_agreement"),
        which_dilution=which,
        internal_standard=_span(found.get("internal_standard")),
    )


def check_rules(table: object, limits: Mapping[str, Any]) -> CheckRules:
    """Read the [checks] table.

    Raises
    ------
    MethodError
        For an unknown key, an impossible value, or a bracket without a limit for its checks.
    """
    found = _table(table, "checks", CHECK_KEYS)
    bracket = _switch(found, "checks", "bracket")
    every = _count(found, "checks", "every")
    keep = _switch(found, "checks", "keep_high_bias_non_detects")
    if bracket and "check_recovery" not in limits:
        raise MethodError(
            "checks.bracket needs the acceptance limit check_recovery; add it", "checks.bracket"
        )
    for key, given in (("every", every is not None), ("keep_high_bias_non_detects", keep)):
        if given and not bracket:
            raise MethodError(f"checks.{key} needs bracket = true beside it", f"checks.{key}")
    return CheckRules(bracket, every, keep)


def specification_of(table: object, unit: str) -> Specification | None:
    """Read the [specification] table; None where the method makes no statement.

    Raises
    ------
    MethodError
        For an unknown key, a limit without its unit, or a statement without a named decision rule.
    """
    if table is None:
        return None
    found = _table(table, "specification", SPECIFICATION_KEYS)
    if "decision_rule" not in found:
        raise MethodError(
            f"[specification] needs a decision_rule: {', '.join(DECISION_RULES)}", "specification"
        )
    limits = {
        key: amount_in(_text(found[key], unit, f"specification.{key}"), unit, f"specification.{key}")
        for key in ("lower", "upper")
        if key in found
    }
    guard = found.get("guard_band", 1.0)
    if isinstance(guard, bool) or not isinstance(guard, int | float) or not 0 < guard < math.inf:
        raise MethodError(
            f"specification.guard_band = {guard!r} must be a multiple of U above 0, such as 1.0",
            "specification.guard_band",
        )
    try:
        return Specification(
            limits.get("lower"), limits.get("upper"), str(found["decision_rule"]), float(guard)
        )
    except InputError as wrong:
        raise MethodError(f"[specification]: {wrong}", "specification") from wrong


def _table(table: object, name: str, keys: tuple[str, ...]) -> Mapping[str, Any]:
    if table is None:
        return {}
    if not isinstance(table, Mapping):
        raise MethodError(f"{name} must be a table with the keys {', '.join(keys)}", name)
    for key in table:
        if key not in keys:
            raise MethodError(f"unknown key '{name}.{key}'; known are {', '.join(keys)}", f"{name}.{key}")
    return table


def _text(value: object, unit: str, key: str) -> str:
    if not isinstance(value, str):
        raise MethodError(f'{key} = {value!r} has no unit; write {key.split(".")[1]} = "{value} {unit}"', key)
    return value


def _above_zero(value: object, unit: str, key: str) -> float:
    amount = amount_in(_text(value, unit, key), unit, key)
    if not amount > 0:
        raise MethodError(f"{key} = {value!r} must be above 0", key)
    return amount


def _count(table: Mapping[str, Any], name: str, key: str) -> int | None:
    value = table.get(key)
    if value is None:
        return None
    if isinstance(value, bool) or not isinstance(value, int) or value < 1:
        raise MethodError(f"{name}.{key} = {value!r} must be a whole number of at least 1", f"{name}.{key}")
    return value


def _fraction(table: Mapping[str, Any], key: str) -> float | None:
    value = table.get(key)
    if value is None:
        return None
    ratio = ratio_of(value) if isinstance(value, str) else value
    if isinstance(ratio, bool) or not isinstance(ratio, int | float) or not 0 < ratio < math.inf:
        raise MethodError(
            f'results.{key} = {value!r} must be a fraction above 0, such as 0.2 or "20 %"', f"results.{key}"
        )
    return float(ratio)


def _span(value: object) -> tuple[float, float] | None:
    if value is None:
        return None
    ends = [ratio_of(v) if isinstance(v, str) else v for v in value] if isinstance(value, list) else []
    numbers = [float(v) for v in ends if isinstance(v, int | float) and not isinstance(v, bool)]
    if len(ends) != 2 or len(numbers) != 2 or not 0 < numbers[0] < numbers[1] < math.inf:
        raise MethodError(
            f'results.internal_standard = {value!r} must be the least and largest share, such as ["60 %", "125 %"]',
            "results.internal_standard",
        )
    return numbers[0], numbers[1]


def _switch(table: Mapping[str, Any], name: str, key: str) -> bool:
    value = table.get(key, False)
    if not isinstance(value, bool):
        raise MethodError(f"{name}.{key} = {value!r} must be true or false", f"{name}.{key}")
    return value
