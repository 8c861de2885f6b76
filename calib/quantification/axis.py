"""The concentration axis a curve is inverted on: ln x, or x itself."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calib.curves.curve import Curve
from calib.models import CustomModel
from calib.quantification.roots import bracketed_roots

Array = NDArray[np.float64]

# How far beyond the standards an interval is followed: e^10 on the logarithmic axis,
# ten spans on the plain one.
REACH = 10.0
LOG_STEP = 0.1
PLACES = ("inside", "above", "below")


@dataclass(frozen=True, slots=True)
class End:
    """Response at an end of the axis with its gradient in the parameters."""

    response: float
    gradient: Array
    concentration: float


@dataclass(frozen=True, slots=True)
class Axis:
    """Axis positions t (ln x or x), its ends, and the curve's exact inverse on it.

    Attributes
    ----------
    low, high : float
        Ends of the axis as positions t.
    direction : float
        +1 for a rising curve, −1 for a falling one.
    low_limit, high_limit : End or None
        The response at either end where a response can lie beyond it.
    open_low : float
        Concentration that stands for an open lower end.
    """

    curve: Curve
    logarithmic: bool
    low: float
    high: float
    direction: float
    low_limit: End | None
    high_limit: End | None
    open_low: float

    def concentration(self, t: Array) -> Array:
        """Concentration at axis positions."""
        return np.exp(t) if self.logarithmic else np.asarray(t, dtype=np.float64)

    def position(self, x: Array) -> Array:
        """Axis position of concentrations (−inf for 0 on the logarithmic axis)."""
        if not self.logarithmic:
            return np.asarray(x, dtype=np.float64)
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.asarray(np.log(x))

    def steps(self) -> Array:
        """Positions (s,) from one end of the axis to the other at which the band is looked at.

        Steps are 0.1 in ln x; on the plain axis a fiftieth of the span of the standards, growing
        outside twice that span.
        """
        if self.logarithmic:
            count = int(np.ceil((self.high - self.low) / LOG_STEP)) + 1
            return np.linspace(self.low, self.high, count)
        first = float(self.curve.standards.concentration.min())
        last = self.curve.standards.highest
        span = last - first if last > first else 1.0
        outwards = span * np.geomspace(2.0, REACH, 70)
        near = np.linspace(first - 2.0 * span, last + 2.0 * span, 251)
        at = np.concatenate([first - outwards[:0:-1], near, last + outwards[1:]])
        inside = at[(at > self.low) & (at < self.high)]
        return np.concatenate([[self.low], inside, [self.high]])

    def inverse(self, y: Array) -> Array:
        """Concentration of each response on the branch of the standards; nan where none."""
        model = self.curve.response_model
        if isinstance(model, CustomModel):
            return self._roots(y)
        x = model.inverse(y, self.curve.values)
        return x if self.logarithmic else self._on_branch(x)

    def _on_branch(self, x: Array) -> Array:
        """Mirror a root about the turning point when it lies on the arm without the standards."""
        with np.errstate(invalid="ignore"):
            if self.low_limit is not None:
                x = np.where(x < self.low, 2.0 * self.low - x, x)
            if self.high_limit is not None:
                x = np.where(x > self.high, 2.0 * self.high - x, x)
        return x

    def _roots(self, y: Array) -> Array:
        """Roots of any formula on its branch."""
        at_low, at_high = (float(v) for v in self.curve.predict(np.array([self.low, self.high])))
        sign = 1.0 if at_high >= at_low else -1.0
        reached = ((at_low - y) * (at_high - y) <= 0) & (at_low != at_high)
        root = bracketed_roots(
            lambda x: sign * (self.curve.predict(x) - y),
            np.full(y.shape, self.low),
            np.full(y.shape, self.high),
        )
        # At the end of the branch itself the bracket is a point.
        root = np.where(y == at_high, self.high, np.where(y == at_low, self.low, root))
        return np.where(reached, root, np.nan)

    def places(self, value: Array, y: Array) -> NDArray[np.int8]:
        """Place of each unknown beside the calibrated range, as a number in `PLACES`.

        Where no value exists, a response beyond that of an end standard decides.
        """
        low, high = self.curve.standards.lowest, self.curve.standards.highest
        with np.errstate(invalid="ignore"):
            place = (value > high) + 2 * (value < low).astype(np.int8)
        missing = np.flatnonzero(~np.isfinite(value))
        if missing.size:
            bottom, top = self.curve.predict(np.array([low, high]))
            above, below = self.direction * (y[missing] - top) > 0, self.direction * (y[missing] - bottom) < 0
            place[missing] = np.select([above, below], [1, 2], 0)
        return np.asarray(place, dtype=np.int8)


def axis_of(curve: Curve) -> Axis:
    """Axis of a fitted curve."""
    model, p = curve.response_model, curve.values
    lowest, highest = curve.standards.lowest, curve.standards.highest
    first = float(curve.standards.concentration.min())
    ends = np.asarray(curve.predict(np.array([first, highest])))
    direction = 1.0 if ends[1] >= ends[0] else -1.0
    if model.logarithmic:
        zero, infinite = model.limit_at_zero(p), model.limit_at_infinity(p)
        return Axis(
            curve,
            True,
            float(np.log(lowest)) - REACH,
            float(np.log(highest)) + REACH,
            direction,
            End(zero.response, zero.gradient, 0.0) if zero else None,
            End(infinite.response, infinite.gradient, highest * np.exp(REACH)) if infinite else None,
            0.0,
        )
    span = highest - first or 1.0
    branch_low, branch_high = model.branch(p, first, highest)
    low, high = max(branch_low, first - REACH * span), min(branch_high, highest + REACH * span)
    return Axis(
        curve,
        False,
        low,
        high,
        direction,
        _turning(curve, low) if low == branch_low else None,
        _turning(curve, high) if high == branch_high else None,
        0.0 if isinstance(model, CustomModel) and low >= 0 else -np.inf,
    )


def _turning(curve: Curve, x: float) -> End:
    """End of a branch as the limit of what the curve can reach."""
    gradient = curve.response_model.gradient(np.array(x), curve.values)
    return End(float(curve.predict(x)), gradient, x)
