"""Whether a result passes the specification of its method, with the rule it was decided by."""

from __future__ import annotations

import math
from dataclasses import dataclass

from calib.bench.method_definition import MethodDefinition
from calib.bench.records import QuantityRecord, VerdictRecord, lowest_reported
from calib.quantification.specification import SIMPLE, UNDECIDED, Specification, decide, decide_below


@dataclass(frozen=True, slots=True)
class Statement:
    """A statement of conformity.

    Attributes
    ----------
    outcome : str
        'pass', 'fail' or 'undecided'.
    rule : str
        The decision rule, with its guard band and the limits, in words.
    """

    outcome: str
    rule: str


def statement_of(definition: MethodDefinition, verdict: VerdictRecord, q: QuantityRecord) -> Statement | None:
    """State whether an unknown passes; None where the method makes no statement.

    A result above the range or without a value is undecided, one below it is decided by the limit that
    is reported.
    """
    specification = definition.specification
    if specification is None or q.role != "unknown":
        return None
    rule = _in_words(specification, q.unit)
    if q.concentration is not None:
        return Statement(decide(specification, q.concentration, *_reach(q)), rule)
    floor = lowest_reported(definition, verdict)
    if q.position == "below" and verdict.accepted and floor is not None:
        return Statement(decide_below(specification, floor * q.dilution), rule)
    return Statement(UNDECIDED, rule)


def _reach(q: QuantityRecord) -> tuple[float, float]:
    """How far the interval reaches below and above the value; infinite where an end is open."""
    value = q.concentration or 0.0
    below = math.inf if q.lower is None else value - q.lower
    above = math.inf if q.upper is None else q.upper - value
    return below, above


def _in_words(specification: Specification, unit: str) -> str:
    ends = [
        f"{word} {limit:g}" if unit == "1" else f"{word} {limit:g} {unit}"
        for word, limit in (("at least", specification.lower), ("at most", specification.upper))
        if limit is not None
    ]
    band = "" if specification.rule == SIMPLE else f", guard band {specification.guard:g} U"
    return f"{' and '.join(ends)}, {specification.rule}{band}"
