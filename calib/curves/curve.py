"""A fitted curve: frozen, complete, and able to predict."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import ArrayLike, NDArray

from calib.curves.diagnostics import Finding
from calib.curves.noise import NoiseModel
from calib.curves.quantiles import two_sided
from calib.curves.standards import Standards
from calib.models import ResponseModel

if TYPE_CHECKING:
    from calib.quantification.budget import FurtherUncertainty
    from calib.quantification.inverse import Quantity

Array = NDArray[np.float64]


# Findings under which the parameters are no properties of what was measured.
NOT_IDENTIFIED = ("asymptote-not-reached", "not-identifiable")


@dataclass(frozen=True, slots=True)
class BackCalculation:
    """Standards read back on their own curve.

    Attributes
    ----------
    value : (n,) array
        Concentration; nan where the response lies off the curve, and for a model of several columns.
    relative_error : (n,) array
        value/level − 1 as a fraction; nan at level 0.
    """

    value: Array
    relative_error: Array


@dataclass(frozen=True, slots=True)
class Curve:
    """Result of `calib.fit`.

    Attributes
    ----------
    response_model : ResponseModel
    values : (k,) array
        All parameters in the model's order.
    free : (k,) bool array
        False for parameters that were held fixed.
    lower, upper : (k,) arrays
        Bounds in force.
    covariance : (k, k) array
        Covariance of the parameters, zero for fixed ones.
    noise : NoiseModel
        Variance function that was used; a curve never pools or estimates again.
    standards : Standards
        What was fitted.
    residual_sum : float
        Weighted sum of squared residuals.
    degrees_of_freedom : int
        Readings minus free parameters.
    scale : float
        Standard deviation that multiplies the noise model: `residual_sd`, or 1 when
        standard uncertainties are known.
    coverage_freedom : float
        Degrees of freedom behind `scale` (infinite when it is known).
    r_squared, aicc : float
        Shown, never judged.
    determined : (k,) bool array
        False for parameters on a bound or in a direction the standards say nothing about.
    converged : bool
    findings : tuple of Finding
    solver : str
    """

    response_model: ResponseModel
    values: Array
    free: NDArray[np.bool_]
    lower: Array
    upper: Array
    covariance: Array
    noise: NoiseModel
    standards: Standards
    residual_sum: float
    degrees_of_freedom: int
    scale: float
    coverage_freedom: float
    r_squared: float
    aicc: float
    determined: NDArray[np.bool_]
    converged: bool
    findings: tuple[Finding, ...]
    solver: str

    @property
    def model(self) -> str:
        """Key of the response model."""
        return self.response_model.name

    @property
    def parameters(self) -> dict[str, float]:
        """Parameter values by name."""
        return {n: float(v) for n, v in zip(self.response_model.names, self.values, strict=True)}

    @property
    def standard_errors(self) -> dict[str, float]:
        """Standard uncertainty of each parameter; 0 for a fixed one, nan for one not determined."""
        u = np.where(self.determined, np.sqrt(np.diag(self.covariance)), np.nan)
        return {n: float(v) for n, v in zip(self.response_model.names, u, strict=True)}

    @property
    def identified(self) -> bool:
        """Whether the parameters mean anything; values read inside the standards stand in either case."""
        return all(f.code not in NOT_IDENTIFIED for f in self.findings)

    @property
    def fixed(self) -> dict[str, float]:
        """Parameters that were held, with their values."""
        return {n: v for (n, v), f in zip(self.parameters.items(), self.free, strict=True) if not f}

    @property
    def residual_sd(self) -> float:
        """Square root of residual_sum over degrees of freedom; nan without any."""
        nu = self.degrees_of_freedom
        return float(np.sqrt(self.residual_sum / nu)) if nu > 0 else np.nan

    def predict(self, x: ArrayLike) -> Array:
        """Response on the curve at concentrations ``x``.

        Examples
        --------
        >>> import calib
        >>> curve = calib.fit([0, 1, 2, 3], [1.0, 3.0, 5.0, 7.0], model="line")
        >>> round(float(curve.predict(1.5)), 9)
        4.0
        """
        return self.response_model.response(np.asarray(x, dtype=np.float64), self.values)

    def fit_variance(self, x: ArrayLike) -> Array:
        """Variance of the curve itself at ``x``: J cov J'."""
        derivatives = self.response_model.derivatives(np.asarray(x, dtype=np.float64), self.values)
        return _quadratic_form(derivatives, self.covariance)

    def reading_variance(self, x: ArrayLike) -> Array:
        """Variance of a single reading at ``x``: scale² · G."""
        x = np.asarray(x, dtype=np.float64)
        return np.asarray(self.scale**2 * self.noise.variance(self.predict(x), x))

    def band(self, x: ArrayLike, confidence: float = 0.95) -> tuple[Array, Array]:
        """Confidence band of the mean response at ``x``: lower, upper."""
        return self._around(x, self.fit_variance(x), confidence)

    def prediction_band(
        self, x: ArrayLike, replicates: int = 1, confidence: float = 0.95
    ) -> tuple[Array, Array]:
        """Band for the mean of ``replicates`` new readings at ``x``: lower, upper."""
        variance = self.fit_variance(x) + self.reading_variance(x) / replicates
        return self._around(x, variance, confidence)

    def _around(self, x: ArrayLike, variance: Array, confidence: float) -> tuple[Array, Array]:
        half = two_sided(self.coverage_freedom, confidence) * np.sqrt(variance)
        middle = self.predict(x)
        return middle - half, middle + half

    def back_calculate(self) -> BackCalculation:
        """Read the standards back on the curve."""
        from calib.quantification.inverse import concentration_of

        x = self.standards.concentration
        value = concentration_of(self, self.standards.response)
        if x.ndim > 1:
            return BackCalculation(value, value)
        with np.errstate(divide="ignore", invalid="ignore"):
            return BackCalculation(value, np.where(x != 0, value / x - 1.0, np.nan))

    def invert(
        self,
        responses: ArrayLike,
        replicates: ArrayLike = 1,
        confidence: float = 0.95,
        interval: str = "inversion",
        components: Sequence[FurtherUncertainty] = (),
        seed: int | None = None,
    ) -> Quantity:
        """Concentrations of unknowns with their intervals; see `quantification.inverse.invert`."""
        from calib.quantification.inverse import invert

        return invert(
            self,
            responses,
            replicates=replicates,
            confidence=confidence,
            interval=interval,
            components=components,
            seed=seed,
        )


def _quadratic_form(derivatives: Sequence[Array], covariance: Array) -> Array:
    """Sum of derivatives[i]·covariance[i, j]·derivatives[j] over all i and j."""
    total: Array | float = 0.0
    for i, one in enumerate(derivatives):
        row = covariance[i, i] * one
        for j in range(i + 1, len(derivatives)):
            row = row + 2.0 * covariance[i, j] * derivatives[j]
        total = total + row * one
    return np.asarray(total)
