"""Acceptance limits as people read them: percent, whole numbers, concentrations with their unit."""

from __future__ import annotations

from typing import TYPE_CHECKING

from calib.acceptance import CRITERIA, Quantity
from calib.report.wording import number, with_unit

if TYPE_CHECKING:
    from calib.acceptance import Limit


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
