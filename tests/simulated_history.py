"""Simulated laboratories with a history of runs each, and how often their intervals cover.

Each laboratory pools its past runs with calib.pool_noise; its next runs are fitted and unknowns
read with the functions a user calls. Coverage is counted at concentrations over the working range
and where the curve has reached 90, 94 and 97 % of its span, for 1, 2 and 3 replicates.
"""

from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np

import calib
from calib.models import ResponseModel, response_model

LEVELS = 3.0 ** np.arange(-6, 2) * 1000 / 3.0
HISTORY, LABORATORIES = 20, 60
REPLICATES = (1, 2, 3)
SHARES = (0.90, 0.94, 0.97)
INSIDE = 9

NOISES: Mapping[str, Callable[[np.ndarray], np.ndarray]] = {
    "T1": lambda mean: 0.04 * np.abs(mean) ** 0.8,
    "T2": lambda mean: np.hypot(0.008, 0.04 * mean),
    "T3": lambda mean: np.full_like(mean, 0.03),
    "T4": lambda mean: 0.05 * np.abs(mean),
}


@dataclass(frozen=True)
class Case:
    """A true curve; the standards reach 94 % of its span as in the rising 4PL."""

    model: str
    truth: tuple[float, ...]
    heavy_tails: bool = False
    level_error: float = 0.0

    @property
    def response(self) -> ResponseModel:
        return response_model(self.model)

    @property
    def levels(self) -> np.ndarray:
        return LEVELS * self.at_share(0.94) / LEVELS[-1]

    def at_share(self, share: float) -> float:
        """Concentration where the curve has reached a share of its span."""
        x = np.geomspace(1e-3, 1e8, 200001)
        low, high = self.response.limit_at_zero(self.truth), self.response.limit_at_infinity(self.truth)
        reached = (self.response.response(x, self.truth) - low.response) / (high.response - low.response)
        return float(np.interp(share, reached, x))


CASES = {
    "4PL rising": Case("4PL", (0.05, 2.5, 100.0, 1.2)),
    "4PL falling": Case("4PL", (2.5, 0.05, 100.0, 1.2)),
    "5PL rising": Case("5PL", (0.05, 2.5, 100.0, 1.2, 0.7)),
    "5PL falling": Case("5PL", (2.5, 0.05, 100.0, 1.2, 0.7)),
    "saturation": Case("saturation", (0.05, 2.45, 100.0)),
    "squared-saturation": Case("squared-saturation", (0.05, 2.45, 100.0)),
    "quenching": Case("quenching", (0.0, 2.5, 0.01)),
    "heavy tails": Case("4PL", (0.05, 2.5, 100.0, 1.2), heavy_tails=True),
    "levels 2 % off": Case("4PL", (0.05, 2.5, 100.0, 1.2), level_error=0.02),
}


def readings(case: Case, noise: str, x: np.ndarray, rng: np.random.Generator) -> np.ndarray:
    """Responses at true concentrations, scattering as the truth says."""
    mean = case.response.response(x, case.truth)
    deviate = (
        rng.standard_t(4, mean.shape) / np.sqrt(2.0) if case.heavy_tails else rng.standard_normal(mean.shape)
    )
    return mean + NOISES[noise](mean) * deviate


def prepared(
    case: Case, replicates: int, runs: int, rng: np.random.Generator
) -> tuple[np.ndarray, np.ndarray]:
    """Nominal concentrations (n,) and what is really in the standards (runs, n): a level is prepared once a run."""
    x = np.repeat(case.levels, replicates)
    errors = 1.0 + case.level_error * rng.standard_normal((runs, case.levels.size))
    return x, x * np.repeat(errors, replicates, axis=1)


def asked(case: Case, noise: str, x: np.ndarray) -> np.ndarray:
    """Concentrations over the working range of the true curve, then those of the shares of the span."""
    sd = NOISES[noise](case.response.response(x, case.truth))
    held = {"offset": 0.0} if case.model == "quenching" else {}
    ideal = calib.fit(x, case.response.response(x, case.truth), case.model, u=sd, fixed=held)
    span = calib.working_range(ideal, 0.2)
    return np.array([*np.geomspace(span.lowest, span.highest, INSIDE), *(case.at_share(s) for s in SHARES)])


@dataclass(frozen=True)
class Coverage:
    """Shares (replicates, concentrations) of the runs; ``at`` are the concentrations.

    ``disagreements`` counts intervals, of ``compared``, that say something else than the band.
    """

    at: np.ndarray
    covered: np.ndarray
    too_high: np.ndarray
    too_low: np.ndarray
    disagreements: int
    compared: int


def coverage(
    case: Case,
    noise: str,
    replicates: int,
    runs: int,
    seed: int = 1,
    compare: int = 2,
    history: int = HISTORY,
) -> Coverage:
    """Coverage of one cell: laboratories with a history each, and their next runs.

    A concentration lies in the interval when its prediction band contains the response, which costs
    a hundredth of finding both ends; of ``compare`` runs a laboratory the intervals themselves are
    found with Curve.invert and compared.
    """
    rng = np.random.default_rng(seed)
    x, _ = prepared(case, replicates, 1, rng)
    at = asked(case, noise, x)
    laboratories = min(LABORATORIES, max(runs // 25, 1))
    new = runs // laboratories
    outcome = np.zeros((3, len(REPLICATES), at.size))
    disagreements = 0
    for _ in range(laboratories):
        past = calib.fit_stack(
            x, readings(case, noise, prepared(case, replicates, history, rng)[1], rng), case.model
        )
        model = calib.pool_noise(past)
        y = readings(case, noise, prepared(case, replicates, new, rng)[1], rng)
        for number, curve in enumerate(calib.fit_stack(x, y, case.model, noise=model)):
            for i, m in enumerate(REPLICATES):
                response = readings(case, noise, np.tile(at, (m, 1)), rng).mean(axis=0)
                lower, upper = curve.prediction_band(at, replicates=m)
                inside = (lower <= response) & (response <= upper)
                outcome[:, i] += np.array([inside, response > upper, response < lower])
                if number < compare:
                    disagreements += int(np.sum(contained(curve, response, m, at) != inside))
    total = new * laboratories
    compared = min(compare, new) * laboratories * len(REPLICATES) * at.size
    return Coverage(at, *(outcome / total), disagreements, compared)


def contained(curve: calib.Curve, response: np.ndarray, replicates: int, at: np.ndarray) -> np.ndarray:
    """Whether the interval of each response contains the true concentration."""
    found = curve.invert(response, replicates=replicates)
    return (found.lower <= at) & (at <= found.upper)
