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
from calib.errors import InputError, ModelError
from calib.quantification.axis import PLACES, axis_of
from calib.quantification.band import Band, Estimate, Limits
from calib.quantification.budget import FurtherUncertainty
from calib.quantification.monte_carlo import TRIALS, drawn_limits
from calib.quantification.states import (
    ASYMMETRIC,
    NO_ESTIMATE,
    OFF,
    OK,
    PIECE,
    STATES,
    inverted_states,
    states,
    words,
)

Array = NDArray[np.float64]
INTERVALS = ("inversion", "delta", "monte-carlo")


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
    components: Sequence[FurtherUncertainty] = (),
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
    components : sequence of Component or CurveComponent
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
    (2.492, ('ok',))
    """
    y, m = _checked(curve, responses, replicates, confidence, interval)
    band = Band(axis_of(curve), confidence, tuple(components))
    # Undefined values are expected on the way and end as states, not as warnings.
    with np.errstate(all="ignore"):
        if interval == "delta":
            return _delta(band, y, m)
        read = band.estimate(y, m)
        limits = band.limits(y, m, read)
        if interval == "inversion":
            return _quantity(band, y, m, read, limits)
        seed = SEED if seed is None else seed
        lower, upper = drawn_limits(band.axis, y, m, confidence, band.components, trials, seed)
        # Only a second region is still told by the inversion.
        drawn = _quantity(band, y, m, read, replace(limits, lower=lower, upper=upper))
        return replace(drawn, seed=int(seed), trials=trials)


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
    return y, np.broadcast_to(m, y.shape)


def _delta(band: Band, y: Array, m: Array) -> Quantity:
    """Limits value ± q·u; the state and k are those of the inversion, which says whether they hold."""
    codes, second = inverted_states(band, y, m)
    value, curve_u, nu, lower, upper, k = (np.empty(y.size) for _ in range(6))
    u = np.empty(y.size) if band.components else curve_u
    place = np.empty(y.size, dtype=np.int8)
    for i in range(0, y.size, PIECE):
        part = slice(i, i + PIECE)
        read = band.estimate(y[part], m[part])
        value[part], curve_u[part], nu[part] = read.value, read.u, read.degrees_of_freedom
        u[part] = read.combined
        half = read.q * u[part]
        np.subtract(read.value, half, out=lower[part])
        np.add(read.value, half, out=upper[part])
        k[part] = np.where(codes[part] == OK, read.q, np.nan)
        place[part] = band.axis.places(read.value, y[part])
    return Quantity(
        value, u, lower, upper, k, nu, words(codes, STATES), words(place, PLACES), second, curve_u
    )


def _quantity(band: Band, y: Array, m: Array, read: Estimate, limits: Limits) -> Quantity:
    """What may be reported with limits: no value where both ends are open, no ± where one is far longer."""
    codes = states(band, y, m, read, limits)
    off, closed = codes == OFF, (codes == OK) | (codes == ASYMMETRIC)
    return Quantity(
        value=np.where(codes == NO_ESTIMATE, np.nan, read.value),
        u=np.where(closed, read.combined, np.nan),
        lower=np.where(off, np.nan, limits.lower),
        upper=np.where(off, np.nan, limits.upper),
        k=np.where(codes == OK, read.q, np.nan),
        degrees_of_freedom=read.degrees_of_freedom,
        state=words(codes, STATES),
        # From the estimate itself, also where none is reported because both ends are open.
        position=words(band.axis.places(read.value, y), PLACES),
        second_region=limits.second,
        curve_u=np.where(closed, read.u, np.nan),
    )
