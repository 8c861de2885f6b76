"""What a replay hands to screen and report: frozen records of what would change."""

from __future__ import annotations

import math
from collections import Counter
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from datetime import datetime

from calib.bench.read_archive import Reported, SampleKey

# No report shows a relative difference below this one, and limits near a plateau amplify the last
# digits of a fit; two fits of the same readings differ by far less inside the calibrated range.
VISIBLE = 1e-6


@dataclass(frozen=True, slots=True)
class Span:
    """A range of concentrations; both ends are None where there is none."""

    lowest: float | None
    highest: float | None

    def differs(self, other: Span) -> bool:
        """Whether an end lies elsewhere."""
        return _differs(self.lowest, other.lowest) or _differs(self.highest, other.highest)


@dataclass(frozen=True, slots=True)
class Outcome:
    """Verdict on a run and the ranges of its curve.

    A run of unknowns has those of the curve it is read on; its decision is 'expired' where
    that curve would no longer have been in force.
    """

    decision: str
    reasons: tuple[str, ...]
    calibrated: Span
    working: Span


@dataclass(frozen=True, slots=True)
class SampleChange:
    """A sample at one dilution whose report would change; None where nothing is reported."""

    sample: str
    role: str
    dilution: float
    before: Reported | None
    after: Reported | None

    @property
    def change(self) -> str:
        """What changes: 'appears', 'disappears', 'concentration', or 'interval' alone."""
        if self.before is None:
            return "appears"
        if self.after is None:
            return "disappears"
        return (
            "concentration" if _differs(self.before.concentration, self.after.concentration) else "interval"
        )

    @property
    def relative_change(self) -> float | None:
        """Concentration after over before, minus 1."""
        if self.before is None or self.after is None or self.before.concentration == 0:
            return None
        return self.after.concentration / self.before.concentration - 1.0


@dataclass(frozen=True, slots=True)
class ReplayedRun:
    """One run as it is in the store and as the other method version would have had it.

    ``samples`` holds those whose report would change, of ``sample_count`` in all.
    """

    id: int
    kind: str
    instrument: str
    method: str
    version: int
    at: datetime
    unit: str
    before: Outcome
    after: Outcome
    samples: tuple[SampleChange, ...]
    sample_count: int

    @property
    def changes(self) -> tuple[str, ...]:
        """What changes, of 'verdict', 'calibrated range', 'working range' and 'samples'."""
        found = {
            "verdict": self.before.decision != self.after.decision,
            "calibrated range": self.before.calibrated.differs(self.after.calibrated),
            "working range": self.before.working.differs(self.after.working),
            "samples": bool(self.samples),
        }
        return tuple(what for what, differs in found.items() if differs)

    @property
    def first_reason(self) -> str | None:
        """Why the verdict is another: the first reason against the run after, or else before."""
        if self.before.decision == self.after.decision:
            return None
        return next(iter((*self.after.reasons, *self.before.reasons)), None)

    @property
    def sample_changes(self) -> dict[str, int]:
        """How many samples change, by kind of change (see `SampleChange.change`)."""
        return dict(Counter(s.change for s in self.samples))

    @property
    def largest_change(self) -> float | None:
        """Relative change of a reported concentration that is largest in size."""
        changes = (s.relative_change for s in self.samples if s.change == "concentration")
        return max((c for c in changes if c is not None), key=abs, default=None)


@dataclass(frozen=True, slots=True)
class ReplayedMethod:
    """A method version that was replayed; ``version`` is None for a file that is not in the store."""

    name: str
    version: int | None
    file: str | None
    runs: int


@dataclass(frozen=True, slots=True)
class Replay:
    """Runs under another method version; nothing of it is stored.

    Attributes
    ----------
    methods : tuple of ReplayedMethod
        What the runs were evaluated under.
    changed : tuple of ReplayedRun
        Only the runs that would change, in the order they were measured.
    runs, void, samples : int
        Runs that were evaluated again, void ones that were left out, and the samples in the former.
    """

    methods: tuple[ReplayedMethod, ...]
    changed: tuple[ReplayedRun, ...]
    runs: int
    void: int
    samples: int

    @property
    def verdict_changes(self) -> dict[tuple[str, str], int]:
        """How many curves change from one decision to another; runs of unknowns have none of their own."""
        pairs = (
            (run.before.decision, run.after.decision) for run in self.changed if run.kind == "calibration"
        )
        return dict(Counter(pair for pair in pairs if pair[0] != pair[1]))

    @property
    def sample_changes(self) -> dict[str, int]:
        """How many samples change, by kind of change (see `SampleChange.change`)."""
        return dict(Counter(s.change for run in self.changed for s in run.samples))

    @property
    def largest_change(self) -> tuple[int, float] | None:
        """Run with the largest relative change of a reported concentration, and that change."""
        changes = [(run.id, c) for run in self.changed if (c := run.largest_change) is not None]
        return max(changes, key=lambda change: abs(change[1]), default=None)

    def runs_with(self, change: str) -> int:
        """Calibration runs with such a change (see `ReplayedRun.changes`)."""
        return sum(change in run.changes for run in self.changed if run.kind == "calibration")


def sample_changes(
    before: Mapping[SampleKey, Reported], after: Mapping[SampleKey, Reported]
) -> Iterable[SampleChange]:
    """Samples whose report differs, in the order of the run."""
    for key in {**before, **after}:
        old, new = before.get(key), after.get(key)
        if _report_differs(old, new):
            role, sample, dilution, _nominal = key
            yield SampleChange(sample, role, dilution, old, new)


def _report_differs(before: Reported | None, after: Reported | None) -> bool:
    if before is None or after is None:
        return before is not after
    size = abs(before.concentration)
    return any(
        _differs(a, b, size)
        for a, b in (
            (before.concentration, after.concentration),
            (before.lower, after.lower),
            (before.upper, after.upper),
        )
    )


def _differs(a: float | None, b: float | None, size: float = 0.0) -> bool:
    """Whether two numbers differ visibly, in relation to themselves or to ``size``."""
    if a is None or b is None:
        return a is not b
    return not math.isclose(a, b, rel_tol=VISIBLE, abs_tol=VISIBLE * size)
