"""A second road to an interval: propagate distributions for the samples of a run, and compare."""

from __future__ import annotations

from dataclasses import dataclass

from calib.bench.evidence import finite
from calib.bench.records import QuantityRecord, RunRecord
from calib.bench.uncertainty_basis import UncertaintyBasis
from calib.curves.chance import SEED
from calib.curves.curve import Curve
from calib.errors import InputError
from calib.quantification.asymptotes import asymptote_index
from calib.quantification.inverse import invert


@dataclass(frozen=True, slots=True)
class CrossCheck:
    """Limits by Monte Carlo (JCGM 101) of one quantity, after dilution; an open end is None."""

    sample: str
    dilution: float
    unit: str
    lower: float | None
    upper: float | None
    state: str
    seed: int
    trials: int


def cross_check(record: RunRecord, sample: str, seed: int | None = None) -> tuple[CrossCheck, ...]:
    """Propagate distributions for one sample, with the components its interval was given with.

    Nothing is stored: the same seed gives the same limits.

    Raises
    ------
    InputError
        When the run has no reading of the sample on an accepted curve.
    """
    curve, basis = record.evaluation.curve, record.evaluation.basis
    found = [q for q in record.evaluation.quantities if q.sample == sample and q.mean_response is not None]
    if not found or not record.evaluation.verdict.accepted:
        raise InputError(
            f"sample '{sample}' has no reading on an accepted curve, so there is nothing to check"
        )
    return tuple(_checked(curve, basis, q, SEED if seed is None else seed) for q in found)


def _checked(curve: Curve, basis: UncertaintyBasis, q: QuantityRecord, seed: int) -> CrossCheck:
    components = basis.components(curve, diluted=q.dilution != 1.0) if q.kind == "combined" else ()
    drawn = invert(
        curve,
        [q.mean_response or 0.0],
        replicates=q.replicates,
        confidence=q.confidence,
        interval="monte-carlo",
        components=components,
        seed=seed,
    )
    lower, upper = (finite(float(end[0]) * q.dilution) for end in (drawn.lower, drawn.upper))
    return CrossCheck(q.sample, q.dilution, q.unit, lower, upper, drawn.state[0], seed, drawn.trials or 0)


def ends_of(record: RunRecord, q: QuantityRecord) -> tuple[float | None, float | None]:
    """Index of the curve's end at concentration 0 and of that for large ones; None where it has none."""
    if q.mean_response is None or not record.evaluation.curve.converged:
        return None, None
    found = asymptote_index(record.evaluation.curve, [q.mean_response], q.replicates, q.confidence)
    return finite(float(found.zero[0])), finite(float(found.infinite[0]))
