"""Criteria on the control samples of a run: how many keep their recovery limit, in all and at each level."""

import math
from collections.abc import Mapping, Sequence
from typing import ClassVar

from calib.acceptance.criterion import CriterionResult, LimitedCriterion
from calib.acceptance.evidence import Evidence, JudgedCheck
from calib.acceptance.limits import Limit, Quantity, at_least, within
from calib.acceptance.run_criteria import CheckRecovery
from calib.acceptance.wording import amount, count, listed, percent

RECOVERY = "control_recovery"


class ControlRecovery(CheckRecovery):
    """Largest deviation abs(found / nominal - 1) of the controls."""

    key: ClassVar[str] = RECOVERY
    role: ClassVar[str] = "control"
    noun: ClassVar[str] = "control"


class ControlsPassing(LimitedCriterion):
    """Share of all controls that keep their recovery limit.

    Source of the rule: ICH M10, 2022, 3.3.2: two thirds of all, and half at each level.
    """

    key: ClassVar[str] = "controls_passing"
    quantity: ClassVar[Quantity] = Quantity.SHARE

    def judge(self, evidence: Evidence) -> CriterionResult:
        """Compare the passing share with the limit; a run without controls has nothing to judge."""
        what = f"at least {_share(self.limit.value)} of the controls within {_recovery(self.limits)}"
        controls = _controls(evidence)
        if not controls:
            return self._result(what, None, True, "no control in this run")
        passing = sum(_keeps(c, self.limits) for c in controls)
        share = passing / len(controls)
        needed = math.ceil(self.limit.value * len(controls) * (1 - 1e-12) - 1e-9)
        failing = [c for c in controls if not _keeps(c, self.limits)]
        named = "; not within: " + listed([_named(c, evidence) for c in failing]) if failing else ""
        return self._result(
            what,
            share,
            at_least(share, self.limit.value),
            f"{passing} of {count(len(controls), 'control')} ({100 * share:.1f} %){named}",
            f"{needed} of {len(controls)} controls would have to pass; no sample result of this run is released",
        )


class ControlsPassingEachLevel(LimitedCriterion):
    """Smallest share, over the levels, of the controls that keep their recovery limit."""

    key: ClassVar[str] = "controls_passing_each_level"
    quantity: ClassVar[Quantity] = Quantity.SHARE

    def judge(self, evidence: Evidence) -> CriterionResult:
        """Compare the worst level with the limit; a run without controls has nothing to judge."""
        what = f"at least {_share(self.limit.value)} of the controls at each level within {_recovery(self.limits)}"
        levels = _by_level(_controls(evidence))
        if not levels:
            return self._result(what, None, True, "no control in this run")
        shares = {level: _passing_share(group, self.limits) for level, group in levels.items()}
        failing = [level for level, share in shares.items() if not at_least(share, self.limit.value)]
        words = [
            f"{sum(_keeps(c, self.limits) for c in levels[level])} of {len(levels[level])} at "
            f"{amount(level, evidence.concentration_unit)}"
            for level in (failing or levels)
        ]
        return self._result(
            what,
            min(shares.values()),
            not failing,
            listed(words),
            "the level named would have to have half or more of its controls within the limit",
        )


class ControlLevels(LimitedCriterion):
    """Number of control levels inside the calibrated range at which half or more of the controls pass.

    After the range moved inwards, so many levels must remain inside it (ICH M10, 2022, 3.3.2, second-hand).
    """

    key: ClassVar[str] = "control_levels"
    quantity: ClassVar[Quantity] = Quantity.COUNT

    def judge(self, evidence: Evidence) -> CriterionResult:
        """Compare the number of levels with the limit; a run without controls has nothing to judge."""
        needed = int(self.limit.value)
        what = f"at least {count(needed, 'control level')} inside the calibrated range"
        controls, ends = _controls(evidence), evidence.ends
        if not controls:
            return self._result(what, None, True, "no control in this run")
        inside = {
            level: group
            for level, group in _by_level(controls).items()
            if ends is not None and ends[0] <= level <= ends[1]
        }
        good = [level for level, group in inside.items() if at_least(_passing_share(group, self.limits), 0.5)]
        return self._result(
            what,
            len(good),
            len(good) >= needed,
            f"{count(len(good), 'passing level')} inside the range",
            "widen the range by a new run, or measure controls at more levels inside it",
        )


class ControlsInSampleRange(LimitedCriterion):
    """Number of control levels inside the range of concentrations met in the samples.

    Source of the rule: ICH M10, 2022, 3.3.3: at least two, else the curve is narrowed or controls added
    (from memory).
    """

    key: ClassVar[str] = "controls_in_sample_range"
    quantity: ClassVar[Quantity] = Quantity.COUNT

    def judge(self, evidence: Evidence) -> CriterionResult:
        """Compare the number of levels with the limit; without controls or samples there is nothing to judge."""
        needed = int(self.limit.value)
        what = f"at least {count(needed, 'control level')} among the concentrations met in the samples"
        levels, met = _by_level(_controls(evidence)), evidence.sample_range
        if not levels or met is None:
            return self._result(what, None, True, "no controls, or no samples inside the calibrated range")
        inside = [level for level in levels if met[0] <= level <= met[1]]
        unit = evidence.concentration_unit
        return self._result(
            what,
            len(inside),
            len(inside) >= needed,
            f"{count(len(inside), 'control level')} between {met[0]:.3g} and {amount(float(f'{met[1]:.3g}'), unit)}",
            "narrow the curve, or add controls among the concentrations the samples have",
        )


def _controls(evidence: Evidence) -> list[JudgedCheck]:
    controls = (c for c in evidence.checks if c.role == "control")
    return sorted(controls, key=lambda c: (c.level, c.label, math.isnan(c.found), c.found))


def _by_level(controls: Sequence[JudgedCheck]) -> dict[float, list[JudgedCheck]]:
    levels: dict[float, list[JudgedCheck]] = {}
    for control in controls:
        levels.setdefault(control.level, []).append(control)
    return levels


def _keeps(control: JudgedCheck, limits: Mapping[str, Limit]) -> bool:
    return within(control.deviation, limits[RECOVERY].value)


def _passing_share(group: Sequence[JudgedCheck], limits: Mapping[str, Limit]) -> float:
    return sum(_keeps(c, limits) for c in group) / len(group)


def _named(control: JudgedCheck, evidence: Evidence) -> str:
    found = "off the curve" if math.isnan(control.deviation) else f"{100 * control.deviation:+.1f} %"
    return f"{control.label} at {amount(control.level, evidence.concentration_unit)}: {found}"


def _recovery(limits: Mapping[str, Limit]) -> str:
    return percent(limits[RECOVERY].value)


def _share(value: float) -> str:
    """Two thirds are said as such."""
    return "two thirds" if abs(value - 2 / 3) < 1e-9 else percent(value)
