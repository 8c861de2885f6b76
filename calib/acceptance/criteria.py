"""All acceptance criteria a method can set, and the refusal of limits that contradict each other."""

from collections.abc import Mapping
from types import MappingProxyType

from calib.acceptance.control_criteria import (
    RECOVERY,
    ControlLevels,
    ControlRecovery,
    ControlsInSampleRange,
    ControlsPassing,
    ControlsPassingEachLevel,
)
from calib.acceptance.criterion import Criterion, LimitedCriterion
from calib.acceptance.design_criteria import (
    MinimumBlanks,
    MinimumChecks,
    MinimumControls,
    MinimumControlShare,
    MinimumFirstChecks,
    MinimumZeros,
)
from calib.acceptance.limits import Limit, check_value, place
from calib.acceptance.run_criteria import (
    Blank,
    BlankShare,
    CarryOver,
    CheckRecovery,
    FirstCheckRecovery,
    OpeningCheckRecovery,
    ResidualSd,
    SaturatedStandards,
)
from calib.acceptance.shape_criteria import (
    LackOfFit,
    MandelLinearity,
    ResponseFactorSpread,
    RSquared,
    TopOfRange,
    TopSlope,
    VarianceHomogeneity,
    VarianceOfOneLevel,
)
from calib.acceptance.standard_criteria import (
    HIGHEST,
    LOWEST,
    MIDDLE,
    RELATIVE_ERRORS,
    ErrorAtHighest,
    ErrorAtLowest,
    ErrorOfStandards,
    LevelsPassing,
    MinimumLevels,
    StandardErrorOfCurve,
    StandardsPassing,
)
from calib.acceptance.wording import percent
from calib.errors import MethodError

CRITERIA: Mapping[str, type[LimitedCriterion]] = MappingProxyType(
    {
        criterion.key: criterion
        for criterion in (
            ErrorOfStandards,
            ErrorAtLowest,
            ErrorAtHighest,
            StandardsPassing,
            LevelsPassing,
            MinimumLevels,
            StandardErrorOfCurve,
            ResponseFactorSpread,
            RSquared,
            ResidualSd,
            LackOfFit,
            MandelLinearity,
            VarianceHomogeneity,
            VarianceOfOneLevel,
            TopSlope,
            TopOfRange,
            SaturatedStandards,
            Blank,
            BlankShare,
            CarryOver,
            FirstCheckRecovery,
            OpeningCheckRecovery,
            CheckRecovery,
            ControlRecovery,
            ControlsPassing,
            ControlsPassingEachLevel,
            ControlLevels,
            ControlsInSampleRange,
            MinimumBlanks,
            MinimumZeros,
            MinimumFirstChecks,
            MinimumChecks,
            MinimumControls,
            MinimumControlShare,
        )
    }
)
"""Setting key and its criterion, in the order a verdict lists them. A new criterion is one line here."""

NO_SATURATION = Limit(0.0, "no saturated reading in the fit unless the method allows it", "common practice")

RELATIVE_ERROR_MEASURES = (ErrorOfStandards.key, StandardErrorOfCurve.key)
NEEDS_CONTROL_RECOVERY = (ControlsPassing.key, ControlsPassingEachLevel.key, ControlLevels.key)
NEEDS_RELATIVE_ERROR = (LOWEST, HIGHEST, StandardsPassing.key, LevelsPassing.key)


def criteria_from(limits: Mapping[str, Limit]) -> tuple[Criterion, ...]:
    """Make the criteria of a method from its limits.

    Parameters
    ----------
    limits : mapping of str to Limit
        Keys of `CRITERIA`. `saturated_standards` is 0 where not given; all others are judged only when given.

    Returns
    -------
    tuple of Criterion
        In the order of `CRITERIA`. `judge` adds 'curve-usable' by itself.

    Raises
    ------
    MethodError
        A key is unknown, a limit is impossible, limits contradict each other, or there is no
        relative-error measure.
    """
    complete = MappingProxyType({SaturatedStandards.key: NO_SATURATION, **limits})
    _refuse_unknown(complete)
    for key, limit in complete.items():
        check_value(key, limit, CRITERIA[key].quantity)
    _refuse_without_relative_error(complete)
    _refuse_without_control_recovery(complete)
    _refuse_narrow_ends(complete)
    return tuple(
        criterion(complete)
        for key, criterion in CRITERIA.items()
        if key in complete and not _counted_by_the_share(key, complete)
    )


def _counted_by_the_share(key: str, limits: Mapping[str, Limit]) -> bool:
    """Whether a limit of single standards or controls rejects nothing by itself.

    Where a method allows a share of them to fail, a single one beyond its limit counts
    against that share; only without such a share must every one keep it.
    """
    if key == RECOVERY:
        return ControlsPassing.key in limits
    return StandardsPassing.key in limits and key in RELATIVE_ERRORS


def _refuse_unknown(limits: Mapping[str, Limit]) -> None:
    for key in limits:
        if key not in CRITERIA:
            raise MethodError(
                f"unknown acceptance limit {key!r}; allowed are {', '.join(CRITERIA)}", place(key)
            )


def _refuse_without_relative_error(limits: Mapping[str, Limit]) -> None:
    # TNI standard, volume 1 module 4, 1.7.1.1 (second-hand): a regression needs a relative-error measure,
    # a correlation coefficient alone accepts nothing.
    if not any(key in limits for key in RELATIVE_ERROR_MEASURES):
        raise MethodError(
            "the acceptance limits have no relative-error measure, without which no curve is accepted;"
            f" give {' or '.join(RELATIVE_ERROR_MEASURES)}",
            "acceptance",
        )
    for key in NEEDS_RELATIVE_ERROR:
        if key in limits and MIDDLE not in limits:
            raise MethodError(
                f"{key} needs the limit {MIDDLE} beside it; give {MIDDLE} or leave {key} out", place(key)
            )


def _refuse_without_control_recovery(limits: Mapping[str, Limit]) -> None:
    for key in NEEDS_CONTROL_RECOVERY:
        if key in limits and RECOVERY not in limits:
            raise MethodError(
                f"{key} needs the limit {RECOVERY} beside it; give {RECOVERY} or leave {key} out", place(key)
            )


def _refuse_narrow_ends(limits: Mapping[str, Limit]) -> None:
    for key in (LOWEST, HIGHEST):
        if key in limits and limits[key].value < limits[MIDDLE].value:
            raise MethodError(
                f"{key} ({percent(limits[key].value)}) is narrower than {MIDDLE}"
                f" ({percent(limits[MIDDLE].value)}); widen it or leave it out",
                place(key),
            )
