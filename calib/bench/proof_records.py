"""What the proof of a method found: coverage of its intervals, and what its criteria notice."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

Z95 = 1.959963984540054


@dataclass(frozen=True, slots=True)
class Share:
    """A count out of so many, with the 95 % interval of the share behind it."""

    count: int
    of: int

    @property
    def value(self) -> float | None:
        """The share; None out of nothing."""
        return self.count / self.of if self.of else None

    @property
    def interval(self) -> tuple[float, float] | None:
        """95 % score interval (E. B. Wilson, J. Am. Stat. Assoc. 22 (1927) 209); None out of nothing."""
        if not self.of:
            return None
        share, z2 = self.count / self.of, Z95**2 / self.of
        middle = (share + z2 / 2.0) / (1.0 + z2)
        half = float(np.sqrt(z2 * share * (1.0 - share) + z2**2 / 4.0)) / (1.0 + z2)
        return max(middle - half, 0.0), min(middle + half, 1.0)


@dataclass(frozen=True, slots=True)
class ProvenCell:
    """Unknowns of one concentration and number of replicates, over the accepted runs.

    Attributes
    ----------
    covered : Share
        Intervals that contain the true concentration; an open end contains all beyond it.
    missed_below, missed_above : Share
        Intervals that lie wholly above, or wholly below, the true concentration.
    bias : float or None
        Median of value/truth − 1, values outside the calibrated range included.
    relative_length : float or None
        Median of (upper − lower)/truth, an open interval being infinitely long; None where that is open.
    open : Share
        Intervals with an open end.
    missing : Share
        No value is reported: outside the calibrated range, off the curve, or no estimate.
    """

    concentration: float
    replicates: int
    covered: Share
    missed_below: Share
    missed_above: Share
    bias: float | None
    relative_length: float | None
    open: Share
    missing: Share


@dataclass(frozen=True, slots=True)
class Scenario:
    """Runs in which nothing, or one fault, happens.

    Attributes
    ----------
    rejected, with_exclusions : Share
        Of all runs.
    covered : Share
        Of the intervals in the runs that were accepted all the same.
    fired : mapping of str to Share
        How often each criterion was not kept, by its key.
    """

    key: str
    words: str
    rejected: Share
    with_exclusions: Share
    covered: Share
    fired: Mapping[str, Share]


@dataclass(frozen=True, slots=True)
class ProvenCriterion:
    """A criterion of the method, in words; ``warns`` where it rejects nothing."""

    key: str
    what: str
    warns: bool


@dataclass(frozen=True, slots=True)
class Proof:
    """What was simulated, and what came out.

    Attributes
    ----------
    noise, noise_source : str
        Taken as true, and where from.
    curves : tuple of int
        Runs whose curves were taken as true, in turn.
    levels : tuple of (level, readings)
        Standards of a run.
    asked_of_faulty : tuple of float
        Concentrations read in runs with a fault, ``usual_replicates`` times each.
    cells : tuple of ProvenCell
        Of the clean runs, by replicates and concentration.
    scenarios : tuple of Scenario
        The clean one first.
    """

    method: str
    version: int
    instrument: str
    model: str
    concentration_unit: str
    confidence: float
    seed: int
    noise: str
    noise_source: str
    residual_sd: float
    method_noise: str
    curves: tuple[int, ...]
    levels: tuple[tuple[float, int], ...]
    calibrated: tuple[float, float]
    asked_of_faulty: tuple[float, ...]
    usual_replicates: int
    cells: tuple[ProvenCell, ...]
    scenarios: tuple[Scenario, ...]
    criteria: tuple[ProvenCriterion, ...]

    @property
    def clean(self) -> Scenario:
        """The runs in which nothing goes wrong."""
        return self.scenarios[0]
