"""The [exclusion] table of a method: whether and how failing standards are left out."""

from __future__ import annotations

from collections.abc import Mapping

from calib.acceptance import ExclusionRule, Limit
from calib.acceptance.exclusion import RULE
from calib.errors import MethodError

KEYS = ("rule", "most", "whole_levels")


def exclusion_rule(table: object, limits: Mapping[str, Limit]) -> ExclusionRule | None:
    """Read the exclusion rule; None where the method has none, which is the default.

    Parameters
    ----------
    table : object
        The [exclusion] table as read from TOML, or None.
    limits : mapping of str to Limit
        Of the method; the counts of the rule are its limits.

    Raises
    ------
    MethodError
        For an unknown key or rule, a missing limit, or more exclusions than levels.
    """
    if table is None:
        return None
    if not isinstance(table, Mapping) or "rule" not in table:
        raise MethodError(f'[exclusion] needs rule = "{RULE}"', "exclusion")
    for key in table:
        if key not in KEYS:
            raise MethodError(
                f"unknown key 'exclusion.{key}'; known are {', '.join(KEYS)}", f"exclusion.{key}"
            )
    if table["rule"] != RULE:
        raise MethodError(
            f'exclusion.rule = {table["rule"]!r} is unknown; known is "{RULE}"', "exclusion.rule"
        )
    for key in ("relative_error", "standards_passing", "minimum_levels"):
        if key not in limits:
            raise MethodError(f"[exclusion] needs the acceptance limit {key}; add it", "exclusion")
    whole = table.get("whole_levels", False)
    if not isinstance(whole, bool):
        raise MethodError(
            f"exclusion.whole_levels = {whole!r} must be true or false", "exclusion.whole_levels"
        )
    levels = max(int(limits[k].value) for k in ("minimum_levels", "levels_passing") if k in limits)
    return ExclusionRule(limits["standards_passing"].value, levels, _most(table, levels), whole)


def _most(table: Mapping[str, object], levels: int) -> int | None:
    most = table.get("most")
    if most is None:
        return None
    if isinstance(most, bool) or not isinstance(most, int) or most < 1:
        raise MethodError(f"exclusion.most = {most!r} must be a whole number of at least 1", "exclusion.most")
    if most >= levels:
        raise MethodError(
            f"exclusion.most = {most} would leave out as many standards as the method asks for levels ({levels})",
            "exclusion.most",
        )
    return most
