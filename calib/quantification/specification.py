"""Pass or fail against a specification, by a named decision rule and with its guard band."""

from __future__ import annotations

from dataclasses import dataclass

from calib.errors import InputError

SIMPLE = "simple acceptance"
GUARDED = "guarded acceptance"
GUARDED_REJECTION = "guarded rejection"
DECISION_RULES = (SIMPLE, GUARDED, GUARDED_REJECTION)

PASS, FAIL, UNDECIDED = "pass", "fail", "undecided"


@dataclass(frozen=True, slots=True)
class Specification:
    """Limits a result is compared with, and how its uncertainty is taken into account.

    Attributes
    ----------
    lower, upper : float or None
        Specification limits, in the method's unit; at least one.
    rule : str
        'simple acceptance': inside the limits passes, whatever the uncertainty. 'guarded acceptance':
        only what is inside by the guard band passes, all else fails. 'guarded rejection': only what is
        outside by the guard band fails, all else passes.
    guard : float
        Guard band as a multiple of the expanded uncertainty.

    Source: JCGM 106:2012; ILAC-G8:09/2019 (both from memory). ISO/IEC 17025:2017, 7.8.6: a statement names
    its rule (verified).
    """

    lower: float | None
    upper: float | None
    rule: str
    guard: float = 1.0

    def __post_init__(self) -> None:
        if self.lower is None and self.upper is None:
            raise InputError("a specification needs a lower or an upper limit")
        if self.lower is not None and self.upper is not None and not self.lower < self.upper:
            raise InputError(f"the lower limit {self.lower:g} must be below the upper one {self.upper:g}")
        if self.rule not in DECISION_RULES:
            raise InputError(f"unknown decision rule '{self.rule}'; known are {', '.join(DECISION_RULES)}")


def decide(specification: Specification, value: float, below: float, above: float) -> str:
    """State whether a result passes.

    Parameters
    ----------
    specification : Specification
    value : float
        Result, in the unit of the limits.
    below, above : float
        How far the interval of the result reaches below and above it, at the method's confidence: U where
        it is symmetric, infinite where an end is open.

    Returns
    -------
    str
        'pass' or 'fail'.
    """
    # Towards the upper limit counts how far the truth may lie above the value, and the other way round.
    match specification.rule:
        case "guarded acceptance":
            up, down = specification.guard * above, specification.guard * below
        case "guarded rejection":
            up, down = -specification.guard * below, -specification.guard * above
        case _:
            up, down = 0.0, 0.0
    too_high = specification.upper is not None and value > specification.upper - up
    too_low = specification.lower is not None and value < specification.lower + down
    return FAIL if too_high or too_low else PASS


def decide_below(specification: Specification, limit: float) -> str:
    """State whether a result that is known only to lie below a limit passes."""
    if specification.lower is not None:
        return FAIL if limit <= specification.lower else UNDECIDED
    return PASS if specification.upper is not None and limit <= specification.upper else UNDECIDED
