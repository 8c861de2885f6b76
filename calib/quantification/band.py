"""The prediction band along the axis, and where it leaves a response on either side."""

from __future__ import annotations

from dataclasses import dataclass
from functools import partial

import numpy as np
from numpy.typing import NDArray

from calib.curves.quantiles import two_sided
from calib.quantification.axis import Axis
from calib.quantification.budget import FurtherUncertainty, effective_freedom
from calib.quantification.roots import bracketed_roots

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

# Unknowns that are solved at once, and whose walk along the axis is held at once.
CHUNK = 4096
WALK = 256


@dataclass(frozen=True, slots=True)
class Estimate:
    """What is read of m responses.

    Attributes
    ----------
    value : (m,) array
        Concentration; nan where the curve never reaches the response.
    u : (m,) array
        Standard uncertainty from reading and curve.
    combined : (m,) array
        The same with the further components.
    degrees_of_freedom, q : (m,) arrays
        Effective degrees of freedom, and the quantile of t that belongs to them.
    """

    value: Array
    u: Array
    combined: Array
    degrees_of_freedom: Array
    q: Array


@dataclass(frozen=True, slots=True)
class Limits:
    """First crossings on either side of m estimates.

    Attributes
    ----------
    lower, upper : (m,) arrays
        Concentrations; an open end is that of the axis, or infinite.
    second : (m,) bool array
        The response agrees with a further stretch too.
    """

    lower: Array
    upper: Array
    second: Mask


@dataclass(frozen=True, slots=True)
class _Steps:
    """Axis positions (s,) with the curve, and the two parts of the variance there."""

    at: Array
    mean: Array
    reading: Array
    own: Array


@dataclass(frozen=True, slots=True)
class _Brackets:
    """Axis positions (2, m) on and off the band, down and up; nan where there is no crossing."""

    inner: Array
    outer: Array
    second: Mask


@dataclass(frozen=True, slots=True)
class Band:
    """Prediction band of a curve, widened by further components."""

    axis: Axis
    confidence: float
    components: tuple[FurtherUncertainty, ...]

    def estimate(self, y: Array, replicates: Array) -> Estimate:
        """Read means of replicates back, with their uncertainty to first order."""
        curve = self.axis.curve
        value = self.axis.inverse(y)
        known = np.isfinite(value) & ((value > 0) | (not self.axis.logarithmic))
        everywhere = bool(known.all())
        x, mean = (value, y) if everywhere else (np.where(known, value, 1.0), np.where(known, y, 1.0))
        # On the curve the mean response is the reading itself.
        reading = curve.scale**2 * curve.noise.variance(mean, x)
        slope = np.abs(curve.response_model.slope(x, curve.values))
        with np.errstate(divide="ignore", invalid="ignore"):
            u = np.sqrt(reading / replicates + curve.fit_variance(x)) / slope
            u = u if everywhere else np.where(known, u, np.nan)
        freedom = curve.coverage_freedom
        if not self.components:
            nu = np.full(y.size, freedom)
            return Estimate(value, u, u, nu, np.full(y.size, two_sided(freedom, self.confidence)))
        with np.errstate(divide="ignore", invalid="ignore"):
            further = [c.response_variance(curve, x) / slope**2 for c in self.components]
            estimated = [c.estimated_variance(curve, x) / slope**2 for c in self.components]
        nu = effective_freedom(
            [u**2, *further], [u**2, *estimated], [freedom, *(c.degrees_of_freedom for c in self.components)]
        )
        combined = np.sqrt(u**2 + sum(further))
        return Estimate(value, u, combined, nu, two_sided(nu, self.confidence))

    def reach(self, replicates: float) -> tuple[float, float]:
        """Lowest and highest response that the band contains anywhere on the axis."""
        steps = self._steps()
        q = two_sided(self.axis.curve.coverage_freedom, self.confidence)
        half = _half(q, steps.reading / replicates + steps.own)
        return float(np.nanmin(steps.mean - half)), float(np.nanmax(steps.mean + half))

    def beyond(self, y: Array, replicates: Array, q: Array) -> tuple[Array, Mask]:
        """Which end of the curve a response lies beyond, and whether outside the band there.

        The side is −1 for the low end, +1 for the far end, 0 for neither.
        """
        curve = self.axis.curve
        side, off = np.zeros(y.size), np.zeros(y.size, dtype=bool)
        for end, which in ((self.axis.low_limit, -1), (self.axis.high_limit, 1)):
            if end is None:
                continue
            past = which * self.axis.direction * (y - end.response) >= 0
            g = curve.noise.variance(np.array([end.response]), np.array([end.concentration]))[0]
            own = end.gradient @ curve.covariance @ end.gradient
            se = np.sqrt(curve.scale**2 * g / replicates + own)
            side = np.where(past, which, side)
            with np.errstate(invalid="ignore"):
                off = off | (past & (np.abs(y - end.response) > q * se))
        return side, off

    def limits(self, y: Array, replicates: Array, read: Estimate) -> Limits:
        """First crossings on either side of each estimate, in chunks of unknowns."""
        steps = self._steps()
        found = Limits(np.empty(y.size), np.empty(y.size), np.empty(y.size, dtype=bool))
        for i in range(0, y.size, CHUNK):
            part = slice(i, i + CHUNK)
            found.lower[part], found.upper[part], found.second[part] = self._limits(
                steps, y[part], replicates[part], read.q[part], read.value[part]
            )
        return found

    def _limits(self, steps: _Steps, y: Array, m: Array, q: Array, value: Array) -> tuple[Array, Array, Mask]:
        axis = self.axis
        estimate = axis.position(value)
        side = self.beyond(y, m, np.full(y.size, np.inf))[0]
        start = np.where(side < 0, axis.low, np.where(side > 0, axis.high, estimate))
        start = np.clip(np.where(np.isnan(start), axis.low, start), axis.low, axis.high)
        brackets = _brackets(steps, y, m, q, start)
        down, up = self._roots(brackets, y, m, q)
        open_down, open_up = np.isnan(down) | (estimate < axis.low), np.isnan(up) | (estimate > axis.high)
        lower = np.where(open_down, axis.open_low, axis.concentration(down))
        return lower, np.where(open_up, np.inf, axis.concentration(up)), brackets.second

    def _steps(self) -> _Steps:
        at = self.axis.steps()
        x = self.axis.concentration(at)
        curve = self.axis.curve
        return _Steps(at, curve.predict(x), curve.reading_variance(x), self._own(x))

    def _own(self, x: Array) -> Array:
        """Variance at a concentration that is not the reading's."""
        curve = self.axis.curve
        own = curve.fit_variance(x)
        for component in self.components:
            own = own + component.response_variance(curve, x)
        return own

    def _roots(self, brackets: _Brackets, y: Array, m: Array, q: Array) -> Array:
        """Axis positions (2, m) of the crossings down and up; nan where there is none."""
        roots = np.full(brackets.outer.shape, np.nan)
        ways, unknowns = np.nonzero(np.isfinite(brackets.outer))
        roots[ways, unknowns] = bracketed_roots(
            partial(self._excess, y=y[unknowns], m=m[unknowns], q=q[unknowns]),
            brackets.inner[ways, unknowns],
            brackets.outer[ways, unknowns],
        )
        return roots

    def _excess(self, t: Array, y: Array, m: Array, q: Array) -> Array:
        """|y − f| minus the half width of the band: above zero outside the interval."""
        curve, x = self.axis.curve, self.axis.concentration(t)
        mean = curve.predict(x)
        reading = curve.scale**2 * curve.noise.variance(mean, x)
        return np.abs(y - mean) - _half(q, reading / m + self._own(x))


def _brackets(steps: _Steps, y: Array, m: Array, q: Array, start: Array) -> _Brackets:
    """Walk from each start outwards, a few unknowns at once."""
    found = _Brackets(np.empty((2, y.size)), np.empty((2, y.size)), np.empty(y.size, dtype=bool))
    for i in range(0, y.size, WALK):
        part = slice(i, i + WALK)
        inside = _inside(steps, y[part], m[part], q[part])
        found.inner[:, part], found.outer[:, part], found.second[part] = _walk(steps.at, inside, start[part])
    return found


def _inside(steps: _Steps, y: Array, m: Array, q: Array) -> Mask:
    """Whether each response (m,) lies on the band at each step (m, s); where undefined, it does not."""
    if (m == m[0]).all() and (q == q[0]).all():
        m, q = m[:1], q[:1]
    half = _half(q[:, None], steps.reading / m[:, None] + steps.own)
    return np.asarray((y[:, None] >= steps.mean - half) & (y[:, None] <= steps.mean + half))


def _walk(at: Array, inside: Mask, start: Array) -> tuple[Array, Array, Mask]:
    """Brackets (2, m) of the first crossings down and up, and whether the band is met a second time.

    ``inside`` (m, s) tells which of the positions ``at`` (s,) are on the band.
    """
    rows, number = np.arange(start.size), np.arange(at.size, dtype=np.int32)
    after = np.searchsorted(at, start, side="right")
    before = np.searchsorted(at, start, side="left") - 1
    up = (number >= after[:, None].astype(np.int32)) & ~inside
    down = (number <= before[:, None].astype(np.int32)) & ~inside
    first = up.argmax(axis=1)
    last = at.size - 1 - down[:, ::-1].argmax(axis=1)
    inner = np.minimum(at[np.minimum(last + 1, at.size - 1)], start), np.maximum(at[first - 1], start)
    outer = np.where(down[rows, last], at[last], np.nan), np.where(up[rows, first], at[first], np.nan)
    # The stretch around the start may be narrower than a step and then is not seen at all.
    stretches = inside[:, 0] + np.count_nonzero(inside[:, 1:] > inside[:, :-1], axis=1)
    seen = inside[rows, np.maximum(before, 0)] | inside[rows, np.minimum(after, at.size - 1)]
    return np.array(inner), np.array(outer), stretches > seen


def _half(q: Array, variance: Array) -> Array:
    """Half width of the band; infinite without degrees of freedom."""
    with np.errstate(invalid="ignore"):
        return np.where(np.isinf(q), np.inf, q * np.sqrt(variance))
