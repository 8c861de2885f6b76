"""Figures as a verdict says them: percent with sign, concentrations with unit."""

import math

from calib.acceptance.evidence import JudgedStandard
from calib.acceptance.limits import within

MOST_DECIMALS = 12


def percent(fraction: float) -> str:
    """Write a limit in percent, for example '15 %'."""
    return f"{100 * fraction:g} %"


def signed_percent(fraction: float, limit: float) -> str:
    """Write a relative error in percent with its sign, one decimal.

    More decimals where one would show a value beyond the limit as if it were on it.
    """
    decimals = 1
    if not within(fraction, limit):
        largest_allowed = round(100 * limit, MOST_DECIMALS)
        while round(100 * abs(fraction), decimals) <= largest_allowed and decimals < MOST_DECIMALS:
            decimals += 1
    return f"{100 * fraction:+.{decimals}f} %"


def figure(value: float, limit: float) -> str:
    """Write an observed value to four digits, or as many as tell it from a limit it exceeds."""
    digits = 4
    while value > limit and float(f"{value:.{digits}g}") <= limit and digits < MOST_DECIMALS:
        digits += 1
    return f"{value:.{digits}g}"


def with_unit(text: str, unit: str) -> str:
    """Append a unit; a bare ratio (unit '1') has none."""
    return text if unit == "1" else f"{text} {unit}"


def amount(concentration: float, unit: str) -> str:
    """Write a nominal concentration with its unit."""
    return with_unit(f"{concentration:g}", unit)


def span(level: float, limit: float, unit: str) -> str:
    """Say between which concentrations a known one reads within its relative limit."""
    low, high = level * max(1 - limit, 0.0), level * (1 + limit)
    return f"between {low:.4g} and {with_unit(f'{high:.4g}', unit)}"


def relative_error_words(standard: JudgedStandard, unit: str, limit: float) -> str:
    """Say one standard's relative error, for example 'S1 at 0.5 ug/L: +16.4 %'."""
    return f"{standard.label} at {amount(standard.level, unit)}: {_outcome(standard, limit)}"


def listed(words: list[str], most: int = 4) -> str:
    """Join so many words; the others are counted."""
    rest = len(words) - most
    return ", ".join(words[:most]) + (f" and {rest} more" if rest > 0 else "")


def worst_first(standards: list[JudgedStandard]) -> list[JudgedStandard]:
    """Standards without a back-calculated value first, then by the size of their relative error."""
    return sorted(
        standards, key=lambda s: -math.inf if math.isnan(s.relative_error) else -abs(s.relative_error)
    )


def count(number: int, noun: str) -> str:
    """Write a number of things, for example '1 blank' or '2 blanks'."""
    return f"{number} {noun}" if number == 1 else f"{number} {noun}s"


def _outcome(standard: JudgedStandard, limit: float) -> str:
    if standard.excluded:
        return "excluded"
    if math.isnan(standard.back_calculated) or math.isnan(standard.relative_error):
        return "no back-calculated value"
    return signed_percent(standard.relative_error, limit)
