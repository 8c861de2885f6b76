"""Plainly defined faults of a run, planted to see which acceptance criterion notices them."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calib.bench.records import Measured

Array = NDArray[np.float64]
Contents = Callable[[Sequence[Measured], Array, np.random.Generator], Array]

MIS_PIPETTED, WRONG_LOT, NOISIER = 0.70, 0.85, 2.0


def _as_planned(readings: Sequence[Measured], contents: Array, rng: np.random.Generator) -> Array:
    """Every cup holds what it should."""
    return contents


@dataclass(frozen=True, slots=True)
class Fault:
    """What goes wrong in a run.

    Attributes
    ----------
    key, words : str
    contents : callable
        From readings, what their cups should hold (n, runs) and chance to what they do hold.
    scatter : float
        Factor on the standard deviation of every reading.
    saturates : bool
        No response goes beyond the one half-way between those of the two highest levels.
    """

    key: str
    words: str
    contents: Contents = _as_planned
    scatter: float = 1.0
    saturates: bool = False


def _exchanged(readings: Sequence[Measured], contents: Array, rng: np.random.Generator) -> Array:
    """All replicates of two neighbouring levels in each other's place."""
    levels = levels_of(readings)
    if levels.size < 2:
        return contents
    changed = contents.copy()
    for run in range(contents.shape[1]):
        lower = int(rng.integers(levels.size - 1))
        one, other = (_at_level(readings, level) for level in levels[lower : lower + 2])
        changed[one, run], changed[other, run] = levels[lower + 1], levels[lower]
    return changed


def _mis_pipetted(readings: Sequence[Measured], contents: Array, rng: np.random.Generator) -> Array:
    """One standard reading, any of them, holds too little."""
    standards = np.flatnonzero([r.role == "standard" and (r.concentration or 0.0) > 0 for r in readings])
    changed = contents.copy()
    changed[rng.choice(standards, contents.shape[1]), np.arange(contents.shape[1])] *= MIS_PIPETTED
    return changed


def _wrong_lot(readings: Sequence[Measured], contents: Array, rng: np.random.Generator) -> Array:
    """All standards hold too little; checks and controls are of another source."""
    standard = np.array([r.role in ("standard", "anchor") for r in readings])
    return np.where(standard[:, None], WRONG_LOT * contents, contents)


def levels_of(readings: Sequence[Measured]) -> Array:
    """Levels of the standards, rising."""
    return np.unique([r.concentration or 0.0 for r in readings if r.role == "standard"])


def _at_level(readings: Sequence[Measured], level: float) -> NDArray[np.intp]:
    return np.flatnonzero([r.role == "standard" and r.concentration == level for r in readings])


CLEAN = Fault("clean", "nothing goes wrong")
FAULTS = (
    Fault("levels-exchanged", "two neighbouring levels are exchanged, all replicates", _exchanged),
    Fault(
        "mis-pipetted", f"one standard reading holds {100 * MIS_PIPETTED:.0f} % of its level", _mis_pipetted
    ),
    Fault("noise-doubled", "every reading scatters twice as much", scatter=NOISIER),
    Fault(
        "wrong-lot",
        f"the standards hold {100 * WRONG_LOT:.0f} % of what their lot is said to hold, checks and controls are right",
        _wrong_lot,
    ),
    Fault(
        "top-saturated",
        "no response goes beyond half-way between those of the two highest levels, and nothing flags it",
        saturates=True,
    ),
)
