"""The unknown: concentration, standard uncertainty and interval.

The interval is the set of concentrations whose prediction band contains the response
(inversion of the prediction band), with the variance taken at the candidate
concentration; the part that contains the estimate is reported. Near a plateau it is
lopsided or open, and it says so instead of printing a symmetric ±.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike, NDArray

from calib.curves.chance import SEED
from calib.curves.curve import Curve
from calib.curves.quantiles import two_sided
from calib.errors import InputError, ModelError
from calib.quantification.axis import Axis, axis_of
from calib.quantification.budget import Component, effective_freedom
from calib.quantification.monte_carlo import TRIALS, drawn_limits

Array = NDArray[np.float64]
INTERVALS = ("inversion", "delta", "monte-carlo")

# The longer side may exceed the shorter by this factor before ± is suppressed.
LOPSIDED = 1.25
CHUNK = 256


@dataclass(frozen=True, slots=True)
class Quantity:
    """Concentrations of m unknowns.

    Attributes
    ----------
    value : (m,) array
        Concentration; nan where none exists.
    u : (m,) array
        Standard uncertainty; indicative in state 'asymmetric', nan where an end is open.
    lower, upper : (m,) arrays
        Interval; an open end is 0 (−inf on the plain axis) or inf.
    k : (m,) array
        Coverage factor, only in state 'ok' (then U = k·u).
    degrees_of_freedom : (m,) array
        Effective degrees of freedom.
    state : tuple of str
        'ok', 'asymmetric', 'open-above', 'open-below', 'no-estimate', 'off-curve'.
    position : tuple of str
        'inside', 'above' or 'below' the calibrated range.
    second_region : (m,) bool array
        A further, separate stretch of concentrations agrees with the response too.
    curve_u : (m,) array
        Part of u that comes from reading and curve.
    seed, trials : int or None
        Behind an interval by Monte Carlo.
    """

    value: Array
    u: Array
    lower: Array
    upper: Array
    k: Array
    degrees_of_freedom: Array
    state: tuple[str, ...]
    position: tuple[str, ...]
    second_region: NDArray[np.bool_]
    curve_u: Array
    seed: int | None = None
    trials: int | None = None

    @property
    def expanded(self) -> Array:
        """U = k·u, only in state 'ok'."""
        return self.k * self.u


def concentration_of(curve: Curve, responses: ArrayLike) -> Array:
    """Read responses back through the curve; nan where it never reaches them."""
    y = np.atleast_1d(np.asarray(responses, dtype=np.float64))
    if not np.all(np.isfinite(curve.values)) or curve.standards.concentration.ndim > 1:
        return np.full(y.shape, np.nan)
    with np.errstate(all="ignore"):
        return axis_of(curve).inverse(y)


def invert(
    curve: Curve,
    responses: ArrayLike,
    *,
    replicates: ArrayLike = 1,
    confidence: float = 0.95,
    interval: str = "inversion",
    components: Sequence[Component] = (),
    seed: int | None = None,
    trials: int = TRIALS,
) -> Quantity:
    """Concentrations of unknowns with standard uncertainty and interval.

    Parameters
    ----------
    curve : Curve
    responses : (m,) array
        Mean responses.
    replicates : int or (m,) array
        Readings behind each mean.
    confidence : float
        Two-sided.
    interval : {'inversion', 'delta', 'monte-carlo'}
        'delta' is the symmetric summary value ± q·u, which covers too little near a plateau;
        `Quantity.state` still tells what the inversion finds. 'monte-carlo' propagates
        distributions (JCGM 101:2008), a cross-check by another road: its limits have equal
        probability beyond them, value, u and k remain those of the inversion.
    components : sequence of Component
        Further uncertainties, added inside the inversion and drawn in the Monte Carlo.
    seed : int, optional
        Of the Monte Carlo; kept with the result, also where none is given.
    trials : int
        Of the Monte Carlo.

    Raises
    ------
    InputError
        For responses, replicates or a confidence that cannot be used.
    ModelError
        For a curve that has no one concentration axis, or that was not fitted.

    Examples
    --------
    >>> import calib
    >>> curve = calib.fit([0, 1, 2, 3, 4], [0.1, 2.0, 3.9, 6.1, 8.0], model="line")
    >>> quantity = curve.invert([5.0], replicates=2)
    >>> round(float(quantity.value[0]), 3), quantity.state
    (2.477, ('ok',))
    """
    y, m = _checked(curve, responses, replicates, confidence, interval)
    axis = axis_of(curve)
    search = _Search(curve, axis, y, m, confidence, tuple(components))
    # Undefined values are expected on the way and end as states, not as warnings.
    with np.errstate(all="ignore"):
        if interval == "monte-carlo":
            return search.monte_carlo(SEED if seed is None else seed, trials)
        return search.delta() if interval == "delta" else search.inversion()


def _checked(
    curve: Curve, responses: ArrayLike, replicates: ArrayLike, confidence: float, interval: str
) -> tuple[Array, Array]:
    if interval not in INTERVALS:
        raise InputError(f"unknown interval '{interval}'; known are {', '.join(INTERVALS)}")
    if not 0.0 < confidence < 1.0:
        raise InputError(f"confidence {confidence} must lie between 0 and 1, such as 0.95")
    if curve.standards.concentration.ndim > 1:
        raise ModelError(f"model '{curve.model}' has several columns and cannot be inverted")
    if not np.all(np.isfinite(curve.values)):
        raise ModelError(
            f"the curve was not fitted ({curve.findings[0].message}); nothing can be read from it"
        )
    y = np.atleast_1d(np.asarray(responses, dtype=np.float64))
    if y.size == 0:
        raise InputError("no responses; give at least one")
    if y.ndim != 1 or not np.all(np.isfinite(y)):
        bad = int(np.flatnonzero(~np.isfinite(y.ravel()))[0]) if y.ndim == 1 else 0
        raise InputError(f"responses[{bad}] is not a finite number; leave it out or correct it")
    m = np.asarray(replicates, dtype=np.float64)
    if m.shape not in ((), y.shape) or np.any(m < 1) or np.any(m != np.floor(m)):
        raise InputError("replicates must be a whole number of at least 1, or one for each response")
    return y, np.broadcast_to(m, y.shape).copy()


@dataclass(frozen=True, slots=True)
class _Search:
    """One inversion problem: responses y of m replicates each on one axis."""

    curve: Curve
    axis: Axis
    y: Array
    replicates: Array
    confidence: float
    components: tuple[Component, ...]

    @property
    def extra(self) -> float:
        """Sum of the squared relative uncertainties of the further components."""
        return float(sum(c.relative_u**2 for c in self.components))

    def variance(self, t: Array, replicates: Array) -> Array:
        """Variance of the mean of a new reading about the curve at axis positions t."""
        x = self.axis.concentration(t)
        own = self.curve.reading_variance(x) / replicates + self.curve.fit_variance(x)
        if self.extra:
            own = own + (x * self.curve.response_model.slope(x, self.curve.values)) ** 2 * self.extra
        return own

    def estimate(self) -> tuple[Array, Array, Array]:
        """Value, u from reading and curve, and degrees of freedom at each response."""
        value = self.axis.inverse(self.y)
        known = np.isfinite(value) & ((value > 0) | (not self.axis.logarithmic))
        x = np.where(known, value, 1.0)
        slope = np.abs(self.curve.response_model.slope(x, self.curve.values))
        variance = self.curve.reading_variance(x) / self.replicates + self.curve.fit_variance(x)
        with np.errstate(divide="ignore", invalid="ignore"):
            u = np.where(known, np.sqrt(variance) / slope, np.nan)
            relative = (u / np.abs(value)) ** 2
        freedom = self.curve.coverage_freedom
        nu = (
            effective_freedom(relative, freedom, self.components)
            if self.components
            else np.full_like(u, freedom)
        )
        return value, u, nu

    def delta(self) -> Quantity:
        """Limits value ± q·u; the state and k are those of the inversion, which says whether they hold."""
        inverted = self.inversion()
        value, curve_u, nu = self.estimate()
        u = np.sqrt(curve_u**2 + value**2 * self.extra)
        half = two_sided(nu, self.confidence) * u
        return replace(inverted, value=value, u=u, curve_u=curve_u, lower=value - half, upper=value + half)

    def inversion(self) -> Quantity:
        """Interval by inversion of the prediction band."""
        return self.stated(*self.limits())

    def monte_carlo(self, seed: int, trials: int) -> Quantity:
        """Interval between ranked draws; only a second region is still told by the inversion."""
        lower, upper = drawn_limits(
            self.axis, self.y, self.replicates, self.confidence, self.components, trials, seed
        )
        return replace(self.stated(lower, upper, self.limits()[2]), seed=int(seed), trials=trials)

    def stated(self, lower: Array, upper: Array, second: NDArray[np.bool_]) -> Quantity:
        """What limits say about each unknown: its state, and what may be reported with it."""
        value, curve_u, nu = self.estimate()
        q = two_sided(nu, self.confidence)
        side, off = self.beyond(q)
        # Nearly all draws beyond one and the same end say that the response is not on the curve.
        off = off | (lower == np.inf) | (upper == self.axis.open_low)
        lower, upper = np.where(off, np.nan, lower), np.where(off, np.nan, upper)
        open_below = lower <= (0.0 if self.axis.logarithmic else -np.inf)
        open_above = np.isinf(upper)
        gone = (side != 0) | (open_below & open_above)
        t, low, high = (self.axis.position(v) for v in (value, lower, upper))
        with np.errstate(invalid="ignore"):
            short, long = np.minimum(t - low, high - t), np.maximum(t - low, high - t)
            symmetric = long <= LOPSIDED * short
        state = np.select(
            [off, gone, open_above, open_below, symmetric],
            ["off-curve", "no-estimate", "open-above", "open-below", "ok"],
            "asymmetric",
        )
        value = np.where(gone, np.nan, value)
        closed = (state == "ok") | (state == "asymmetric")
        u = np.where(closed, np.sqrt(curve_u**2 + value**2 * self.extra), np.nan)
        k = np.where(state == "ok", q, np.nan)
        return self.quantity(value, u, lower, upper, k, nu, state, second, np.where(closed, curve_u, np.nan))

    def beyond(self, q: Array) -> tuple[Array, NDArray[np.bool_]]:
        """Which end of the curve a response lies beyond, and whether outside the band there.

        The side is −1 for the low end, +1 for the far end, 0 for neither.
        """
        side = np.zeros(self.y.size)
        off = np.zeros(self.y.size, dtype=bool)
        sign = self.axis.direction
        for end, which in ((self.axis.low_limit, -1), (self.axis.high_limit, 1)):
            if end is None:
                continue
            past = which * sign * (self.y - end.response) >= 0
            g = self.curve.noise.variance(np.array([end.response]), np.array([end.concentration]))[0]
            own = end.gradient @ self.curve.covariance @ end.gradient
            se = np.sqrt(self.curve.scale**2 * g / self.replicates + own)
            side = np.where(past, which, side)
            with np.errstate(invalid="ignore"):
                off = off | (past & (np.abs(self.y - end.response) > q * se))
        return side, off

    def limits(self) -> tuple[Array, Array, NDArray[np.bool_]]:
        """First crossings on either side of each estimate, in chunks of unknowns."""
        value, _, nu = self.estimate()
        q = two_sided(nu, self.confidence)
        parts = [self._limits(value, q, slice(i, i + CHUNK)) for i in range(0, self.y.size, CHUNK)]
        lower, upper, second = (np.concatenate(p) for p in zip(*parts, strict=True))
        return lower, upper, second.astype(bool)

    def _limits(self, value: Array, q: Array, part: slice) -> tuple[Array, Array, NDArray[np.bool_]]:
        y, m, q = self.y[part], self.replicates[part], q[part]
        low, high = self.axis.low, self.axis.high
        side = self.beyond(np.full(self.y.size, np.inf))[0][part]
        t = np.where(side < 0, low, np.where(side > 0, high, self.axis.position(value[part])))
        t = np.clip(np.where(np.isnan(t), low, t), low, high)
        down, again_down = self._walk(t, y, m, q, -1)
        up, again_up = self._walk(t, y, m, q, +1)
        lower = np.where(np.isinf(down), self.axis.open_low, self.axis.concentration(down))
        upper = np.where(np.isinf(up), np.inf, self.axis.concentration(np.where(np.isinf(up), 0.0, up)))
        # An estimate beyond the end of the axis leaves that end open.
        estimate = self.axis.position(value[part])
        lower = np.where(estimate < low, self.axis.open_low, lower)
        upper = np.where(estimate > high, np.inf, upper)
        return lower, upper, np.asarray(again_down | again_up)

    def _walk(
        self, t: Array, y: Array, m: Array, q: Array, direction: int
    ) -> tuple[Array, NDArray[np.bool_]]:
        """First crossing from t outwards, ±inf when the end of the axis is reached inside."""
        grid = self.axis.steps(t, direction)
        # Where the curve is undefined nothing agrees with the response.
        outside = ~(self._excess(grid, y[:, None], m[:, None], q[:, None]) <= 0)
        crossed = outside[:, 1:].any(axis=1)
        first = np.where(crossed, outside[:, 1:].argmax(axis=1) + 1, 1)
        rows = np.arange(t.size)
        inner, outer = grid[rows, first - 1], grid[rows, first]
        for _ in range(60):
            middle = 0.5 * (inner + outer)
            is_out = ~(self._excess(middle, y, m, q) <= 0)
            inner, outer = np.where(is_out, inner, middle), np.where(is_out, middle, outer)
        beyond = np.arange(grid.shape[1])[None, :] > first[:, None]
        again = np.asarray(crossed & (~outside & beyond).any(axis=1))
        return np.where(crossed, 0.5 * (inner + outer), direction * np.inf), again

    def _excess(self, t: Array, y: Array, m: Array, q: Array) -> Array:
        """|y − f| minus the half width of the band: above zero outside the interval."""
        distance = np.abs(y - self.curve.predict(self.axis.concentration(t)))
        with np.errstate(invalid="ignore"):
            half = np.where(np.isinf(q), np.inf, q * np.sqrt(self.variance(t, m)))
        return np.asarray(distance - half)

    def quantity(
        self,
        value: Array,
        u: Array,
        lower: Array,
        upper: Array,
        k: Array,
        nu: Array,
        state: Array,
        second: NDArray[np.bool_],
        curve_u: Array,
    ) -> Quantity:
        """Assemble the result with the position of each unknown."""
        # From the estimate itself, also where none is reported because both ends are open.
        position = self.axis.positions(self.axis.inverse(self.y), self.y)
        return Quantity(value, u, lower, upper, k, nu, tuple(state.tolist()), position, second, curve_u)
