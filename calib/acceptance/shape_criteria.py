"""Criteria on the shape of the curve: does the model describe the standards, and is it used as it may be."""

import math
from collections.abc import Sequence
from typing import ClassVar

import numpy as np
from numpy.typing import NDArray
from scipy.special import fdtrc

from calib.acceptance.criterion import CriterionResult, LimitedCriterion
from calib.acceptance.evidence import Evidence, JudgedStandard
from calib.acceptance.limits import Quantity, at_least, within
from calib.acceptance.wording import amount, count, percent, signed_percent

Array = NDArray[np.float64]

STRAIGHT = ("line", "proportional")


class RSquared(LimitedCriterion):
    """Coefficient of determination; only ever beside a relative-error measure, see `criteria_from`."""

    key: ClassVar[str] = "r_squared"
    quantity: ClassVar[Quantity] = Quantity.SHARE

    def judge(self, evidence: Evidence) -> CriterionResult:
        """Compare r² with the limit; without a value it fails."""
        observed = evidence.r_squared
        what = f"r² at least {self.limit.value:g} (never by itself)"
        detail = "no value" if math.isnan(observed) else f"{observed:.6f}"
        return self._result(
            what,
            observed,
            at_least(observed, self.limit.value),
            detail,
            "look at the relative errors of the standards, which show where the curve does not fit",
        )


class ResponseFactorSpread(LimitedCriterion):
    """Relative standard deviation of the response factors y/x, for a curve through the origin.

    Source: EPA SW-846 method 8000D, 11.5.1 (from memory).
    """

    key: ClassVar[str] = "response_factor_rsd"
    quantity: ClassVar[Quantity] = Quantity.FRACTION

    def judge(self, evidence: Evidence) -> CriterionResult:
        """Compare the spread with the limit; only a curve of the form slope·x has response factors."""
        what = f"relative standard deviation of the response factors at most {percent(self.limit.value)}"
        if evidence.model != "proportional":
            return self._result(what, None, True, f"a {evidence.model} curve has no response factor")
        factors = np.array([s.response / s.level for s in evidence.fitted])
        if factors.size < 2 or not factors.mean():
            return self._result(what, None, False, f"no value from {count(factors.size, 'standard')}")
        rsd = float(factors.std(ddof=1) / abs(factors.mean()))
        shown = signed_percent(rsd, self.limit.value).removeprefix("+")
        return self._result(
            what,
            rsd,
            within(rsd, self.limit.value),
            f"{shown} of {count(factors.size, 'response factor')}",
            "the response factors would have to agree better; a regression is a change of the method",
        )


class LackOfFit(LimitedCriterion):
    """p-value of the lack-of-fit test: scatter of the level means about the curve against pure error.

    F = [SS(lack of fit)/(L − p)] / [SS(pure error)/(N − L)] over L levels, N readings and p estimated
    parameters, each reading weighted by the noise model.

    Source: ISO 11095:1996; ICH Q2(R2), 2023 (both from memory).
    """

    key: ClassVar[str] = "lack_of_fit"
    quantity: ClassVar[Quantity] = Quantity.SHARE

    def judge(self, evidence: Evidence) -> CriterionResult:
        """Compare the p-value with the limit; without replicates there is nothing to judge."""
        what = f"p-value of the lack-of-fit test at least {self.limit.value:g}"
        levels = by_level(evidence.in_fit)
        n, p = sum(len(group) for group in levels), evidence.free_parameters
        lack, pure = len(levels) - p, n - len(levels)
        if lack < 1 or pure < 1:
            return self._result(what, None, True, "not enough replicates and levels to tell")
        if any(math.isnan(s.fitted_response) for group in levels for s in group):
            return self._result(what, None, False, "no value: the curve has no response at a level")
        f = _ratio(_lack_sum(levels) / lack, _pure_sum(levels) / pure)
        p_value = float(fdtrc(lack, pure, f))
        return self._result(
            what,
            p_value,
            at_least(p_value, self.limit.value),
            f"p = {p_value:.3g} (F = {f:.4g} with {lack} and {pure} degrees of freedom)",
            "look at the residuals by level for a wrong level or a curve of another shape; "
            "another model is a change of the method, never of a run",
        )


class MandelLinearity(LimitedCriterion):
    """p-value of the linearity test: does a quadratic describe the standards better than the line.

    PG = [(N − 2)·s₁² − (N − 3)·s₂²] / s₂² against F(1, N − 3), s₁ and s₂ the residual standard deviations
    of line and quadratic.

    Source: ISO 8466-1:1990, clause 4 (from memory). A help, not a verdict: its power is low with few levels.
    """

    key: ClassVar[str] = "mandel_linearity"
    quantity: ClassVar[Quantity] = Quantity.SHARE

    def judge(self, evidence: Evidence) -> CriterionResult:
        """Compare the p-value with the limit; a curve that is no line has nothing to judge."""
        what = f"p-value of the linearity test (line against quadratic) at least {self.limit.value:g}"
        if evidence.model != "line":
            return self._result(what, None, True, f"the curve is no line but {evidence.model}")
        points = evidence.in_fit
        n, levels = len(points), len(by_level(points))
        if n < 4 or levels < 3:
            return self._result(what, None, False, f"no value from {count(levels, 'level')}")
        line, quadratic = (residual_sum(points, degree) for degree in (1, 2))
        statistic = _ratio(line - quadratic, quadratic / (n - 3))
        p_value = float(fdtrc(1, n - 3, max(statistic, 0.0)))
        return self._result(
            what,
            p_value,
            at_least(p_value, self.limit.value),
            f"p = {p_value:.3g} (PG = {statistic:.5g} with 1 and {n - 3} degrees of freedom)",
            "shorten the range, or describe the curvature by another model in a new version of the method",
        )


class VarianceHomogeneity(LimitedCriterion):
    """p-value of the test of equal variances at the lowest and the highest level.

    F is the larger variance over the smaller one, each about its own mean and divided by what the noise
    model expects there; with the noise model 'uniform' it is the test of the standard.

    Source: ISO 8466-1:1990, 4.1: 10 readings at either end, F(0.99; 9, 9) (from memory).
    """

    key: ClassVar[str] = "variance_homogeneity"
    quantity: ClassVar[Quantity] = Quantity.SHARE

    def judge(self, evidence: Evidence) -> CriterionResult:
        """Compare the p-value with the limit; without replicates at both ends there is nothing to judge."""
        what = f"p-value of the test of equal variances at the end levels at least {self.limit.value:g}"
        levels = by_level(evidence.fitted)
        if len(levels) < 2 or len(levels[0]) < 2 or len(levels[-1]) < 2:
            return self._result(what, None, True, "no replicates at both end levels")
        ends = sorted((_variance(levels[0]), _variance(levels[-1])), key=lambda end: end[0])
        (smaller, nu2), (larger, nu1) = ends
        f = _ratio(larger, smaller)
        p_value = float(fdtrc(nu1, nu2, f))
        return self._result(
            what,
            p_value,
            at_least(p_value, self.limit.value),
            f"p = {p_value:.3g} (F = {f:.4g} with {nu1} and {nu2} degrees of freedom)",
            "shorten the range, or choose a noise model that lets the scatter change with the response",
        )


class VarianceOfOneLevel(LimitedCriterion):
    """p-value of Cochran's test: does one level scatter far more than the others.

    C is the largest variance of replicates over the sum of them all, for levels of equally many readings,
    each divided by what the noise model expects there.

    Source: ISO 5725-2:1994, 7.3.3 and Table 4 (from memory).
    """

    key: ClassVar[str] = "variance_of_one_level"
    quantity: ClassVar[Quantity] = Quantity.SHARE

    def judge(self, evidence: Evidence) -> CriterionResult:
        """Compare the p-value with the limit; levels without as many replicates have nothing to judge."""
        what = f"p-value of Cochran's test for one scattering level at least {self.limit.value:g}"
        levels = by_level(evidence.fitted)
        sizes = {len(group) for group in levels}
        if len(levels) < 2 or len(sizes) != 1 or min(sizes) < 2:
            return self._result(what, None, True, "levels without equally many replicates")
        variances = [_variance(group)[0] for group in levels]
        total, largest = math.fsum(variances), max(variances)
        if not total:
            return self._result(what, 1.0, True, "no scatter at any level")
        k, nu = len(levels), min(sizes) - 1
        p_value = cochran_p(largest / total, k, nu)
        level = levels[variances.index(largest)][0].level
        return self._result(
            what,
            p_value,
            at_least(p_value, self.limit.value),
            f"p = {p_value:.3g} (C = {largest / total:.4g} at {amount(level, evidence.concentration_unit)})",
            "look for the replicate that stands off at that level, and for its cause",
        )


def cochran_p(share: float, groups: int, nu: int) -> float:
    """Probability, at most 1, of so large a share of the largest of so many variances of ``nu`` degrees of freedom.

    C = 1 / (1 + (k - 1)/F) with F at 1 - p/k, so that p = k times the upper tail of F(nu, (k - 1) nu).
    """
    if share >= 1:
        return 0.0
    f = (groups - 1) * share / (1 - share)
    return min(1.0, groups * float(fdtrc(nu, (groups - 1) * nu, f)))


class TopSlope(LimitedCriterion):
    """Slope of a quadratic at its highest standard, as a share of that at the lowest.

    A curved regression must not hide saturation, insensitivity or malfunction.

    Source: Wisconsin Administrative Code NR 149.444(4)(b); the figure is common practice.
    """

    key: ClassVar[str] = "top_slope"
    quantity: ClassVar[Quantity] = Quantity.SHARE

    def judge(self, evidence: Evidence) -> CriterionResult:
        """Compare the share with the limit; a model that saturates by nature has nothing to judge."""
        what = f"slope at the highest standard at least {percent(self.limit.value)} of that at the lowest"
        if evidence.model != "quadratic":
            return self._result(
                what, None, True, f"judged for a quadratic only; the curve is {evidence.model}"
            )
        low, high = evidence.end_slopes
        share = high / low if low else math.nan
        if math.isnan(share):
            return self._result(what, None, False, "no value")
        return self._result(
            what,
            share,
            at_least(share, self.limit.value),
            f"{100 * share:.1f} %",
            "leave out the highest level and give up the range it stands for, or find what saturates",
        )


class TopOfRange(LimitedCriterion):
    """Response at the highest level, as a share of the straight line through the lower ones.

    Both responses count from the line's response at concentration zero.

    Source: EPA methods 200.7 and 200.8, 9.2.2, linear dynamic range: at least 90 % (from memory).
    """

    key: ClassVar[str] = "top_of_range"
    quantity: ClassVar[Quantity] = Quantity.SHARE

    def judge(self, evidence: Evidence) -> CriterionResult:
        """Compare the share with the limit; only a straight curve is extrapolated."""
        what = f"highest level at least {percent(self.limit.value)} of the line through the lower ones"
        if evidence.model not in STRAIGHT:
            return self._result(
                what, None, True, f"judged for straight curves; the curve is {evidence.model}"
            )
        share = _share_of_extrapolated(evidence)
        if share is None:
            return self._result(what, None, False, "no value: too few levels below the highest")
        top = evidence.fitted[-1].level
        return self._result(
            what,
            share,
            at_least(share, self.limit.value),
            f"{100 * share:.1f} % at {amount(top, evidence.concentration_unit)}",
            "leave out the highest level and give up the range it stands for: samples up there are diluted",
        )


def _share_of_extrapolated(evidence: Evidence) -> float | None:
    """Mean response at the top level over that of the line through the levels below."""
    if not evidence.fitted:
        return None
    top = evidence.fitted[-1].level
    below = [s for s in evidence.in_fit if s.level < top]
    if len({s.level for s in below}) < 2:
        return None
    powers = (1,) if evidence.model == "proportional" else (0, 1)
    coefficients = _weighted_fit(below, powers)
    offset = coefficients[0] if powers[0] == 0 else 0.0
    rise = coefficients[-1] * top
    observed = float(np.mean([s.response for s in evidence.fitted if s.level == top]))
    return float((observed - offset) / rise) if rise else None


def residual_sum(points: Sequence[JudgedStandard], degree: int) -> float:
    """Weighted residual sum of squares of a polynomial through the points."""
    powers = tuple(range(degree + 1))
    coefficients = _weighted_fit(points, powers)
    x, y, root = _columns(points)
    fitted = sum(c * x**k for c, k in zip(coefficients, powers, strict=True))
    return float(np.sum((root * (y - fitted)) ** 2))


def _weighted_fit(points: Sequence[JudgedStandard], powers: tuple[int, ...]) -> Array:
    x, y, root = _columns(points)
    scale = float(np.max(np.abs(x))) or 1.0
    design = np.stack([(x / scale) ** k * root for k in powers], axis=1)
    found = np.linalg.lstsq(design, y * root, rcond=None)[0]
    return np.asarray(found / scale ** np.array(powers, dtype=np.float64))


def _columns(points: Sequence[JudgedStandard]) -> tuple[Array, Array, Array]:
    """Levels, responses, and the square roots of the weights."""
    x = np.array([s.level for s in points])
    y = np.array([s.response for s in points])
    return x, y, 1.0 / np.sqrt(np.array([s.variance for s in points]))


def by_level(points: Sequence[JudgedStandard]) -> list[list[JudgedStandard]]:
    """Readings of each level, levels rising."""
    groups: dict[float, list[JudgedStandard]] = {}
    for point in sorted(points, key=lambda s: (s.level, s.response)):
        groups.setdefault(point.level, []).append(point)
    return list(groups.values())


def _lack_sum(levels: list[list[JudgedStandard]]) -> float:
    return math.fsum(
        len(group) * (_mean(group) - group[0].fitted_response) ** 2 / group[0].variance for group in levels
    )


def _pure_sum(levels: list[list[JudgedStandard]]) -> float:
    return math.fsum((s.response - _mean(group)) ** 2 / s.variance for group in levels for s in group)


def _variance(group: list[JudgedStandard]) -> tuple[float, int]:
    """Variance in units of the noise model, with its degrees of freedom."""
    nu = len(group) - 1
    return _pure_sum([group]) / nu, nu


def _mean(group: list[JudgedStandard]) -> float:
    return math.fsum(s.response for s in group) / len(group)


def _ratio(numerator: float, denominator: float) -> float:
    """F ratio; infinite where the denominator has no scatter at all."""
    if denominator > 0:
        return numerator / denominator
    return math.inf if numerator > 0 else 0.0
