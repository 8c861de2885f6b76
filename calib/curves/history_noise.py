"""The noise model a history of runs is worth: a variance function, and how much it scatters."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import asdict, dataclass
from typing import Any, ClassVar

import numpy as np
from numpy.typing import ArrayLike, NDArray

from calib.curves.moderated_variance import NOISY, ModeratedVariance
from calib.curves.noise import AdditiveRelativeNoise, NoiseModel, PowerOfMeanNoise, noise_from_dict

Array = NDArray[np.float64]

# Below so many runs the variance function is poorly known, and every curve says so.
ENOUGH_RUNS = 5


@dataclass(frozen=True, slots=True)
class HistoryNoise(NoiseModel):
    """Variance function pooled over past runs, with the moderated residual variance.

    Attributes
    ----------
    function : PowerOfMeanNoise or AdditiveRelativeNoise
        The family with the smaller pseudo-likelihood, with its exponent or ratio.
    spread : ModeratedVariance
    runs, readings : int
        That were pooled.
    difference : float
        Pseudo-likelihood of the other family minus that of this one; near 0 neither is preferred.
    """

    function: PowerOfMeanNoise | AdditiveRelativeNoise
    spread: ModeratedVariance
    runs: int
    readings: int
    difference: float
    kind: ClassVar[str] = "history"

    def variance(self, mean: Array, concentration: Array) -> Array:
        """G of the pooled variance function."""
        return self.function.variance(mean, concentration)

    def scale(self, residual_sum: ArrayLike, degrees_of_freedom: ArrayLike) -> tuple[Array, Array]:
        """Moderated standard deviation and its degrees of freedom; a noisy run keeps its own."""
        own, d = NoiseModel.scale(self, residual_sum, degrees_of_freedom)
        variance, nu = self.spread.moderated(own**2, d)
        return np.sqrt(variance), nu

    @property
    def family(self) -> str:
        """'power-of-mean' or 'additive-relative'."""
        return self.function.kind

    @property
    def label(self) -> str:
        """In words."""
        return self.function.label

    def noisy_run(self, residual_sum: float, degrees_of_freedom: int) -> str | None:
        """What to say of a run that scatters more than its history, or None."""
        d = degrees_of_freedom
        own = float(NoiseModel.scale(self, residual_sum, d)[0])
        if d <= 0 or not self.spread.is_noisy(own**2, d):
            return None
        return (
            f"noisy run: residual SD {own:.4g} is {own / self.spread.sd:.2f} times that of the past {self.runs} runs "
            f"({self.spread.sd:.4g}; F = {(own / self.spread.sd) ** 2:.3g}, limit {float(self.spread.limit(d)):.3g} "
            f"at {100 * NOISY:.0f} %, which {100 * self.spread.flagged_when_clean(d):.0f} % of clean runs exceed): "
            "intervals rest on its own scatter; look for the cause"
        )

    def to_dict(self) -> dict[str, Any]:
        """Plain form."""
        return {
            "kind": self.kind,
            "function": self.function.to_dict(),
            "spread": asdict(self.spread),
            "runs": self.runs,
            "readings": self.readings,
            "difference": self.difference,
        }


def history_noise_from(record: Mapping[str, Any]) -> HistoryNoise:
    """Read back what `HistoryNoise.to_dict` wrote."""
    function = noise_from_dict(record["function"])
    assert isinstance(function, PowerOfMeanNoise | AdditiveRelativeNoise)
    spread = ModeratedVariance(**record["spread"])
    return HistoryNoise(function, spread, record["runs"], record["readings"], record["difference"])
