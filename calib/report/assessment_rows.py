"""The assessment of a method in words and table rows."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

from calib.report.wording import MISSING, number, percent, with_unit

if TYPE_CHECKING:
    from calib.bench.assess import Assessment, JudgedComparison
    from calib.curves.nested_models import FTest

CAUTION = (
    "It rests on exact levels and normal scatter. A change of model or range is a new version of the method, to be "
    "validated; the validated method, local rules and accredited practice decide."
)
ASKED = "p < 0.01 and an AICc gain above 4 are asked"
COMPARISON_HEADINGS = (
    "Model",
    "Larger",
    ">Runs",
    ">Nested F",
    ">p",
    ">Lack of fit F",
    ">p",
    ">AICc gain",
    ">Worst bias",
    ">Allowed",
)


def heading(a: Assessment) -> tuple[str, ...]:
    """What was looked at."""
    return (
        f"{a.method} v{a.version} on {a.instrument}: model {a.model} and range, from {a.runs} accepted runs",
        f"noise {a.noise.label}; limits and precision are medians of the last {a.last} runs, for an unknown read "
        f"{'once' if a.replicates == 1 else f'{a.replicates} times'}",
    )


def comparison_rows(a: Assessment) -> list[tuple[str, ...]]:
    """One row for each pair of nested models."""
    return [_row(j) for j in a.comparisons]


def _row(j: JudgedComparison) -> tuple[str, ...]:
    c = j.comparison
    return (
        c.smaller,
        c.larger,
        str(c.runs),
        *_test(c.nested),
        *((MISSING, MISSING) if c.lack_of_fit is None else _test(c.lack_of_fit)),
        f"{c.aicc_difference:+.1f}",
        _bias(j.worst_bias),
        percent(j.allowed),
    )


def _test(test: FTest) -> tuple[str, str]:
    p = "< 0.0001" if test.p < 1e-4 else f"{test.p:.4f}"
    return f"{test.ratio:.2f} ({test.numerator}, {test.denominator})", p


def _bias(bias: float) -> str:
    return "no value read" if math.isinf(bias) else percent(bias)


def range_rows(a: Assessment) -> list[tuple[str, str]]:
    """Range and limits, each with its unit."""
    unit = a.concentration_unit
    low, high = a.calibrated
    working = (
        "none"
        if a.working[0] is None
        else f"{number(a.working[0], 3)} to {with_unit(number(a.working[1], 3), unit)}"
    )
    return [
        ("standards", f"{number(low)} to {with_unit(number(high), unit)}"),
        (f"working range at {percent(a.cv, 0)} CV", working),
        ("critical value", _limit(a.critical, unit)),
        ("detection capability", _limit(a.detectable, unit)),
        ("reporting limit of the method", _limit(a.reporting_limit, unit)),
    ]


def _limit(value: float | None, unit: str) -> str:
    return MISSING if value is None else with_unit(number(value, 3), unit)


def recommendation(a: Assessment) -> list[str]:
    """What the figures call for, in words."""
    return [*(_of_model(a, j) for j in a.comparisons), *_of_range(a)] or ["nothing speaks against the method"]


def _of_model(a: Assessment, j: JudgedComparison) -> str:
    c = j.comparison
    apart = "tell them apart" if c.significant else f"do not tell them apart ({ASKED})"
    cost = f"; {c.smaller} would cost {_bias(j.worst_bias)}"
    allowed = "" if j.allowed is None else f" where {percent(j.allowed)} is allowed"
    told = f"{c.smaller} against {c.larger}: {c.runs} runs {apart}{cost}{allowed}"
    if a.model == c.smaller:
        advice = (
            f"consider {c.larger} in a new version of the method" if j.larger_needed else f"keep {c.smaller}"
        )
    else:
        # A smaller model is advised only where nothing tells them apart: what is seen may grow at other levels.
        advice = f"keep {c.larger}" if c.significant else f"{c.smaller} would do with fewer parameters"
    return f"{told}: {advice}"


def _of_range(a: Assessment) -> list[str]:
    unit, (low, high), found = a.concentration_unit, a.calibrated, []
    first, last = a.working
    if first is None or last is None:
        return [
            f"no concentration meets {percent(a.cv, 0)}: more replicates, or a less demanding requirement"
        ]
    # The ends are found on a grid of 801 points: closer than that they are the same.
    if first > low * 1.01:
        found.append(f"below {with_unit(number(first, 3), unit)} an unknown does not meet {percent(a.cv, 0)}")
    if last < high / 1.01:
        found.append(f"above {with_unit(number(last, 3), unit)} an unknown does not meet {percent(a.cv, 0)}")
    if not found:
        found.append(f"the whole range of the standards meets {percent(a.cv, 0)}")
    if a.detectable is not None and a.reporting_limit is not None and a.reporting_limit < a.detectable:
        found.append(
            "the reporting limit lies below the detection capability: raise it, or read more replicates"
        )
    if a.detectable is not None and a.detectable > low:
        found.append("the lowest standard lies below the detection capability")
    return found
