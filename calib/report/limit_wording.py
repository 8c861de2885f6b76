"""Acceptance limits as people read them: percent, whole numbers, concentrations with their unit."""

from __future__ import annotations

from typing import TYPE_CHECKING

from calib.acceptance import CRITERIA, Quantity
from calib.acceptance.exclusion import RULE
from calib.report.wording import number, percent, with_unit

if TYPE_CHECKING:
    from calib.acceptance import Limit
    from calib.bench.method_definition import MethodDefinition


def limit_text(key: str, limit: Limit, unit: str) -> str:
    """Write a limit with what it is counted in; one that only warns says so.

    Parameters
    ----------
    key : str
        Setting of the limit.
    limit : Limit
    unit : str
        Concentration unit of the method.
    """
    match CRITERIA[key].quantity:
        case Quantity.FRACTION:
            text = f"{number(100 * limit.value)} %"
        case Quantity.CONCENTRATION:
            text = with_unit(number(limit.value), unit)
        case _:
            text = number(limit.value)
    return f"{text} (warns)" if limit.warns else text


def settings_in_words(definition: MethodDefinition) -> tuple[str, ...]:
    """What a method says beside its limits, one sentence each; nothing for what it leaves at its default."""
    found = (
        _exclusion(definition),
        *_results(definition),
        _checks(definition),
        _specification(definition),
        f"a curve needs a passing check after: {', '.join(definition.needs_check_after) or 'nothing'}",
    )
    return tuple(line for line in found if line)


def _exclusion(definition: MethodDefinition) -> str:
    rule = definition.exclusion
    if rule is None:
        return ""
    most = "" if rule.most is None else f", {rule.most} at most"
    what = "whole levels" if rule.whole_levels else "single readings"
    return (
        f"failing standards are left out, {RULE} ({what}{most}), while {percent(rule.share, 0)} of them and "
        f"{rule.levels} levels remain"
    )


def _results(definition: MethodDefinition) -> tuple[str, ...]:
    rules, unit = definition.results, definition.concentration_unit
    lines = []
    if rules.reporting_limit is not None:
        lines.append(f"reporting limit {with_unit(number(rules.reporting_limit), unit)}, times the dilution")
    if rules.minimum_replicates > 1:
        lines.append(f"a result needs {rules.minimum_replicates} readings")
    if rules.replicate_cv is not None:
        lines.append(
            f"coefficient of variation of the responses of a sample at most {percent(rules.replicate_cv)}"
        )
    if rules.dilution_agreement is not None:
        lines.append(
            f"dilutions of one sample agree within {percent(rules.dilution_agreement)}; "
            f"which counts: {rules.which_dilution}"
        )
    if rules.internal_standard is not None:
        low, high = rules.internal_standard
        lines.append(
            f"internal standard of a sample {percent(low)} to {percent(high)} of that of the standards"
        )
    return tuple(lines)


def _checks(definition: MethodDefinition) -> str:
    checks = definition.checks
    if not checks.bracket:
        return ""
    every = "" if checks.every is None else f", no more than {checks.every} samples apart"
    return f"a sample counts only between two passing check standards{every}"


def _specification(definition: MethodDefinition) -> str:
    specification, unit = definition.specification, definition.concentration_unit
    if specification is None:
        return ""
    ends = [
        f"{word} {with_unit(number(limit), unit)}"
        for word, limit in (("at least", specification.lower), ("at most", specification.upper))
        if limit is not None
    ]
    return f"specification: {' and '.join(ends)}, by {specification.rule}, guard band {number(specification.guard)} U"
