"""Figures as people read them: rounded only here, full precision stays in the records.

An uncertainty has two significant digits and its value as many decimals (GUM, JCGM 100:2008,
7.2.6). A limit of a one-sided statement is rounded away from the claim, so that it stays true.
"""

from __future__ import annotations

import math
from decimal import ROUND_CEILING, ROUND_FLOOR, ROUND_HALF_EVEN, Context, Decimal
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from calib.bench.records import QuantityRecord

MISSING = "–"
NO_RESULT = "no result"
# Replicates that contradict each other make the interval untrue: the value is printed alone.
SPREAD = "replicate-spread"
LOW = "below-reporting-limit"
UNCERTAINTY_DIGITS = 2
LIMIT_DIGITS = 3
LEVEL_DIGITS = 6
# Outside these sizes a number is written with a power of ten.
SMALLEST_PLAIN, LARGEST_PLAIN = 1e-4, 1e7
# Room for every float in plain digits.
EXACT = Context(prec=1100)


def number(value: float | None, digits: int = 4) -> str:
    """Write a number to so many significant digits, without trailing zeros.

    Whole digits are never rounded away. An undefined number is a dash.

    Examples
    --------
    >>> number(0.25), number(1234567.0), number(0.000012345), number(None)
    ('0.25', '1234567', '1.234e-05', '–')
    """
    shown = significant(value, digits)
    return shown.rstrip("0").rstrip(".") if "." in shown and "e" not in shown else shown


def significant(value: float | None, digits: int = 4) -> str:
    """Write a number to so many significant digits, trailing zeros kept.

    Examples
    --------
    >>> significant(0.25), significant(99.996), significant(1234567.0), significant(None)
    ('0.2500', '100.0', '1234567', '–')
    """
    if value is None or not math.isfinite(value):
        return MISSING
    if value == 0:
        return "0"
    if not SMALLEST_PLAIN <= abs(value) < LARGEST_PLAIN:
        return f"{value:.{digits}g}"
    shown = _to_place(value, min(_leading_place(value) - digits + 1, 0))
    carried = _leading_place(float(shown)) > _leading_place(value) and "." in shown
    return shown[:-1].rstrip(".") if carried else shown


def percent(fraction: float | None, digits: int = 1) -> str:
    """Write a fraction in percent with so many decimals.

    Examples
    --------
    >>> percent(0.153), percent(0.2, 0), percent(None)
    ('15.3 %', '20 %', '–')
    """
    if fraction is None or not math.isfinite(fraction):
        return MISSING
    return f"{100 * fraction:.{digits}f} %"


def with_unit(text: str, unit: str) -> str:
    """Append a unit; a bare ratio (unit '1') has none."""
    return text if unit == "1" else f"{text} {unit}"


def visible(text: str) -> str:
    """Text with control and direction characters written out, so that nothing hides on a screen."""
    if text.isprintable():
        return text
    return "".join(c if c.isprintable() else f"<U+{ord(c):04X}>" for c in text)


def in_brackets(name: str, unit: str) -> str:
    """Name of an axis or a column with its unit, for example 'response [nA]'."""
    return name if unit == "1" else f"{name} [{unit}]"


def rounded(value: float, u: float) -> tuple[str, str]:
    """Write an uncertainty to two significant digits, and its value to the same decimals.

    Parameters
    ----------
    value : float
    u : float
        Standard or expanded uncertainty; where it is 0 or undefined the value keeps four digits.

    Returns
    -------
    tuple of str
        Value and uncertainty.

    Examples
    --------
    >>> rounded(1.5349, 0.1062), rounded(56789.0, 1234.0), rounded(1.0, 0.0996)
    (('1.53', '0.11'), ('56800', '1200'), ('1.00', '0.10'))
    """
    if not math.isfinite(u) or u <= 0:
        return number(value), number(u)
    place = _uncertainty_place(u)
    return _to_place(value, place), _to_place(u, place)


def plus_minus(value: float, u: float) -> str:
    """Write value ± uncertainty, with a power of ten where plain digits would be many.

    Examples
    --------
    >>> plus_minus(1.5349, 0.1062), plus_minus(1.5349e-7, 0.1062e-7)
    ('1.53 ± 0.11', '(1.53 ± 0.11) × 10^-7')
    """
    size = max(abs(value), u)
    if size == 0 or SMALLEST_PLAIN <= size < LARGEST_PLAIN or not math.isfinite(size):
        return " ± ".join(rounded(value, u))
    power = _leading_place(size)
    inner = " ± ".join(rounded(value / 10.0**power, u / 10.0**power))
    return f"({inner}) × 10^{power}"


def result_text(q: QuantityRecord, lowest: float | None, highest: float | None) -> str:
    """Say what was found, in one cell.

    Parameters
    ----------
    q : QuantityRecord
    lowest, highest : float or None
        Lowest concentration reported and highest standard in force, before dilution, in the unit of the quantity.

    Returns
    -------
    str
        '1.53 ± 0.11 ug/L' (± is the expanded uncertainty), '1.90 [1.20, 3.40] ug/L' where the
        interval is lopsided, '≥ 3.14 ug/L' where it is open, '> 6.4 ug/L: dilute' and '< 0.25 ug/L'
        outside the calibrated range, else 'no result'.
    """
    if q.state == "off-curve":
        return NO_RESULT
    if q.position == "above":
        return _above(q, highest, "{}: dilute")
    if q.position == "below":
        return _below(q, lowest, "{}")
    if q.concentration is None:
        return NO_RESULT
    if SPREAD in q.flags:
        return with_unit(f"{value_text(q)}, no ±", q.unit)
    if q.state == "ok" and q.expanded is not None:
        return with_unit(plus_minus(q.concentration, q.expanded), q.unit)
    if q.lower is not None and q.upper is not None and q.state == "asymmetric":
        return with_unit(f"{value_text(q)} {_bracketed(q)}", q.unit)
    return limit_text(q) or NO_RESULT


def quantity_text(q: QuantityRecord, lowest: float | None, highest: float | None) -> str:
    """Say the value alone, or in full words why there is none.

    Parameters
    ----------
    q, lowest, highest
        As in `result_text`.

    Returns
    -------
    str
        For example '1.53 ug/L', '≥ 3.14 ug/L (97.5 % one-sided)', '> 6.4 ug/L (highest standard):
        dilute', '< 0.25 ug/L (lowest standard)', 'no result'.
    """
    if q.state == "off-curve":
        return NO_RESULT
    if q.position == "above":
        return _above(q, highest, "{} (highest standard): dilute")
    if q.position == "below":
        return _below(q, lowest, "{} (reporting limit)" if LOW in q.flags else "{} (lowest standard)")
    if q.concentration is None:
        return NO_RESULT
    if q.state in ("ok", "asymmetric"):
        return with_unit(value_text(q), q.unit)
    limit = limit_text(q)
    return f"{limit} ({one_sided(q.confidence)})" if limit else NO_RESULT


def value_text(q: QuantityRecord) -> str:
    """Write the value with the decimals its uncertainty allows."""
    if q.concentration is None:
        return MISSING
    return rounded(q.concentration, _resolution(q))[0]


def interval_text(q: QuantityRecord) -> str:
    """Write the interval, for example '[1.43, 1.64]'; a dash where none is reported.

    Examples
    --------
    An open end is said in words: 'from 3.14, no upper limit'.
    """
    if q.concentration is None or q.position != "inside" or SPREAD in q.flags:
        return MISSING
    if q.state in ("ok", "asymmetric") and q.lower is not None and q.upper is not None:
        return _bracketed(q)
    if q.state == "open-above" and q.lower is not None:
        return f"from {_limit(q.lower, ROUND_FLOOR)}, no upper limit"
    if q.state == "open-below" and q.upper is not None:
        return f"no lower limit, to {_limit(q.upper, ROUND_CEILING)}"
    return MISSING


def expanded_text(q: QuantityRecord) -> str:
    """Write the expanded uncertainty; a dash where the interval is no value ± U."""
    if q.concentration is None or q.state != "ok" or q.expanded is None or SPREAD in q.flags:
        return MISSING
    return rounded(q.concentration, q.expanded)[1]


def limit_text(q: QuantityRecord) -> str:
    """Say the one limit of an interval that is open on one side; empty where there is none."""
    if q.state == "open-above" and q.lower is not None:
        return with_unit(f"≥ {_limit(q.lower, ROUND_FLOOR)}", q.unit)
    if q.state == "open-below" and q.upper is not None:
        return with_unit(f"≤ {_limit(q.upper, ROUND_CEILING)}", q.unit)
    return ""


def one_sided(confidence: float) -> str:
    """Say the one-sided confidence of one end of a two-sided interval.

    Examples
    --------
    >>> one_sided(0.95)
    '97.5 % one-sided'
    """
    return f"{number(50 * (1 + confidence))} % one-sided"


def _above(q: QuantityRecord, highest: float | None, form: str) -> str:
    if highest is None:
        return "above the calibrated range: dilute"
    return form.format(with_unit(f"> {number(highest * q.dilution, LEVEL_DIGITS)}", q.unit))


def _below(q: QuantityRecord, lowest: float | None, form: str) -> str:
    if lowest is None:
        return "below the calibrated range"
    return form.format(with_unit(f"< {number(lowest * q.dilution, LEVEL_DIGITS)}", q.unit))


def _resolution(q: QuantityRecord) -> float:
    """What the digits of a value are cut by: U, or the shorter side of a lopsided interval."""
    if q.state == "ok" and q.expanded is not None:
        return q.expanded
    sides = [abs(q.concentration - end) for end in (q.lower, q.upper) if end is not None and q.concentration]
    return min(sides, default=math.nan)


def _bracketed(q: QuantityRecord) -> str:
    return f"[{', '.join(rounded(end, _resolution(q))[0] for end in (q.lower, q.upper) if end is not None)}]"


def _limit(value: float, rounding: str) -> str:
    if value == 0 or not math.isfinite(value):
        return number(value)
    shown = _to_place(value, _leading_place(value) - LIMIT_DIGITS + 1, rounding)
    return shown if SMALLEST_PLAIN <= abs(value) < LARGEST_PLAIN else f"{float(shown):g}"


def _uncertainty_place(u: float) -> int:
    """Power of ten of the last digit kept; 0.0996 becomes 0.10, not 0.100."""
    place = _leading_place(u) - UNCERTAINTY_DIGITS + 1
    return place + (_leading_place(float(_to_place(u, place))) > _leading_place(u))


def _leading_place(value: float) -> int:
    """Power of ten of the first significant digit."""
    return Decimal(repr(float(value))).adjusted()


def _to_place(value: float, place: int, rounding: str = ROUND_HALF_EVEN) -> str:
    """Round to a power of ten, in plain digits; the decimal the number prints as is what is rounded."""
    kept = Decimal(repr(float(value))).quantize(Decimal((0, (1,), place)), rounding, EXACT)
    return f"{kept if kept else abs(kept):f}"
