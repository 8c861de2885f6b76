"""Bracketing: a sample counts only between two check standards that pass, in the order of measurement.

Source: Standard Methods for the Examination of Water and Wastewater, edition not recorded, 2020 (verified).
"""

from collections.abc import Sequence
from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Injection:
    """One reading in the sequence.

    Attributes
    ----------
    key : int
    kind : str
        'check', 'sample' or 'other'.
    deviation : float
        Of a check: found / nominal - 1; nan off the curve.
    passed : bool
        Of a check: whether it keeps its limit.
    """

    key: int
    kind: str
    deviation: float = 0.0
    passed: bool = True


@dataclass(frozen=True, slots=True)
class Bracket:
    """What stands around one sample.

    Attributes
    ----------
    closed : bool
        A passing check before and a passing one after, not too far apart.
    failed_high : bool
        Not closed only because checks failed, and each of these read too high.
    """

    closed: bool
    failed_high: bool


def brackets(sequence: Sequence[Injection], every: int | None = None) -> dict[int, Bracket]:
    """Judge the bracket of every sample of a sequence.

    Parameters
    ----------
    sequence : sequence of Injection
        In the order of measurement.
    every : int, optional
        Samples at most between two checks.

    Returns
    -------
    dict
        By the key of each sample.
    """
    checks = [place for place, injection in enumerate(sequence) if injection.kind == "check"]
    found: dict[int, Bracket] = {}
    for place, injection in enumerate(sequence):
        if injection.kind == "sample":
            before = max((c for c in checks if c < place), default=None)
            after = min((c for c in checks if c > place), default=None)
            found[injection.key] = _bracket(sequence, before, after, every)
    return found


def _bracket(
    sequence: Sequence[Injection], before: int | None, after: int | None, every: int | None
) -> Bracket:
    if before is None or after is None:
        return Bracket(False, False)
    between = sum(injection.kind == "sample" for injection in sequence[before:after])
    if every is not None and between > every:
        return Bracket(False, False)
    failed = [check for check in (sequence[before], sequence[after]) if not check.passed]
    return Bracket(not failed, bool(failed) and all(check.deviation > 0 for check in failed))
