"""One sample at several dilutions: do the values agree, is there a hook, and which value counts."""

import math
from collections.abc import Sequence
from dataclasses import dataclass

from calib.acceptance.limits import within

LEAST_DILUTED = "least diluted"
MEAN = "mean"
COUNTING = (LEAST_DILUTED, MEAN)


@dataclass(frozen=True, slots=True)
class DilutedValue:
    """A sample at one dilution.

    Attributes
    ----------
    dilution : float
        Factor the value has been multiplied by.
    value : float
        Concentration of the undiluted sample; nan where there is none.
    inside : bool
        The curve's own value, before the dilution, lies inside the calibrated range.
    """

    dilution: float
    value: float
    inside: bool


@dataclass(frozen=True, slots=True)
class DilutionOutcome:
    """What several dilutions of one sample come to.

    Attributes
    ----------
    counts : tuple of float
        Dilutions whose value counts, empty where none does.
    value : float
        The value that counts, or the mean of those that do; nan where none does.
    spread : float
        Largest difference of the values inside the range, relative to their mean; nan below two.
    agree : bool or None
        Whether the spread keeps the limit; None where there is nothing to compare or no limit.
    hook : bool
        A higher dilution gives a value above that of a lower one by more than the limit: at the lower
        dilution the response may have turned back.
    """

    counts: tuple[float, ...]
    value: float
    spread: float
    agree: bool | None
    hook: bool


def judge_dilutions(
    values: Sequence[DilutedValue], limit: float | None, counting: str = LEAST_DILUTED
) -> DilutionOutcome:
    """Compare the values of one sample at several dilutions.

    The range is judged before the dilution, so only values inside it are compared and count. Where they
    disagree none counts; where a hook shows, those at the lower dilutions do not count.

    Source: ICH M10, 2022, 3.2.7 and 4.2.6, dilution integrity: 15 % (ligand binding 20 %) (from memory).

    Parameters
    ----------
    values : sequence of DilutedValue
    limit : float or None
        Relative spread allowed, a fraction.
    counting : str
        'least diluted' or 'mean' of all inside the range.
    """
    inside = sorted((v for v in values if v.inside and math.isfinite(v.value)), key=lambda v: v.dilution)
    if not inside:
        return DilutionOutcome((), math.nan, math.nan, None, False)
    spread = _spread(inside)
    agree = None if limit is None or len(inside) < 2 else within(spread, limit)
    hook = limit is not None and _rises(inside, limit)
    chosen = inside
    if agree is False:
        chosen = _after_hook(inside, limit or 0.0) if hook else []
    if not chosen:
        return DilutionOutcome((), math.nan, spread, agree, hook)
    if counting == LEAST_DILUTED:
        chosen = chosen[:1]
    mean = math.fsum(v.value for v in chosen) / len(chosen)
    return DilutionOutcome(tuple(v.dilution for v in chosen), mean, spread, agree, hook)


def _spread(values: Sequence[DilutedValue]) -> float:
    if len(values) < 2:
        return math.nan
    found = [v.value for v in values]
    mean = math.fsum(found) / len(found)
    return (max(found) - min(found)) / abs(mean) if mean else math.inf


def _rises(values: Sequence[DilutedValue], limit: float) -> bool:
    """Whether a value exceeds one at a lower dilution by more than the limit, relative to the lower one."""
    return any(
        high.value > low.value and not within((high.value - low.value) / abs(low.value or math.inf), limit)
        for i, low in enumerate(values)
        for high in values[i + 1 :]
    )


def _after_hook(values: Sequence[DilutedValue], limit: float) -> list[DilutedValue]:
    """The most diluted values that agree among themselves, at least two; else none."""
    for start in range(1, len(values) - 1):
        if within(_spread(values[start:]), limit):
            return list(values[start:])
    return []
