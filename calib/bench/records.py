"""What the use cases hand to screen and report: frozen records of one run."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from datetime import date, datetime

from calib.acceptance import CriterionResult
from calib.bench.method_definition import MethodDefinition
from calib.bench.review_state import NO_REVIEW, ReviewState
from calib.bench.uncertainty_basis import CURVE_ONLY, UncertaintyBasis
from calib.curves.curve import Curve
from calib.curves.history_noise import HistoryNoise


@dataclass(frozen=True, slots=True)
class Measured:
    """One reading as the evaluation sees it; ``key`` ties it to its record.

    ``concentration`` is nominal, in the method's unit. ``excluded`` holds the reason
    when the reading is left out of the fit. ``place`` says where in the file it stands.
    ``outlying`` is 'excluded' where it was left out as outlying, 'restored' where that was undone
    because the run stayed noisy without it.
    """

    key: int
    sample: str
    role: str
    concentration: float | None
    response: float | None
    absent_cause: str | None
    dilution: float
    position: str | None
    excluded: str | None
    saturated: bool
    place: str = ""
    internal_standard: float | None = None
    outlying: str | None = None

    @property
    def where(self) -> str:
        """Name for messages: sample, and position where there is one."""
        return f"{self.sample} ({self.position})" if self.position else self.sample


@dataclass(frozen=True, slots=True)
class StandardRecord:
    """A standard or anchor reading with what its curve makes of it."""

    key: int
    label: str
    role: str
    position: str | None
    concentration: float
    response: float | None
    absent_cause: str | None
    fitted: bool
    back_calculated: float | None
    relative_error: float | None
    excluded: bool
    reason: str | None
    saturated: bool


@dataclass(frozen=True, slots=True)
class BlankRecord:
    """A blank or zero reading and the concentration the curve reads from it."""

    label: str
    role: str
    position: str | None
    response: float | None
    absent_cause: str | None
    back_calculated: float | None


@dataclass(frozen=True, slots=True)
class QuantityRecord:
    """What one sample at one dilution was found to hold, after dilution.

    ``concentration`` is None where none is reported; ``estimate`` keeps the value that
    lies outside the calibrated range, which is stored and never reported.
    """

    sample: str
    role: str
    nominal: float | None
    replicates: int
    mean_response: float | None
    concentration: float | None
    estimate: float | None
    u: float | None
    k: float | None
    expanded: float | None
    lower: float | None
    upper: float | None
    upper_open: bool
    confidence: float
    kind: str
    degrees_of_freedom: float | None
    state: str
    position: str | None
    flags: tuple[str, ...]
    dilution: float
    unit: str
    curve_id: int | None
    budget: dict[str, float]


@dataclass(frozen=True, slots=True)
class VerdictRecord:
    """A verdict as it was given."""

    decision: str
    criteria: tuple[CriterionResult, ...]
    lowest: float | None
    highest: float | None
    r_squared: float | None

    @property
    def reasons(self) -> tuple[str, ...]:
        """The criteria that reject the curve, in words and figures."""
        return tuple(f"{c.what}: {c.detail}" for c in self.criteria if c.rejects)

    @property
    def warnings(self) -> tuple[str, ...]:
        """The criteria that are not kept and only warn, in words and figures."""
        return tuple(f"{c.what}: {c.detail}" for c in self.criteria if not c.passed and c.warns)

    @property
    def carried_over(self) -> bool:
        """Whether the carry-over blank did not keep its limit."""
        return any(c.id == "carry_over" and not c.passed for c in self.criteria)

    @property
    def accepted(self) -> bool:
        """Whether the curve may be used."""
        return self.decision != "rejected"


@dataclass(frozen=True, slots=True)
class PastRun:
    """A run that took part in a pooled noise model, by the numbers of the run and of its curve."""

    run: int
    curve: int


@dataclass(frozen=True, slots=True)
class NoiseHistory:
    """A noise model pooled over past runs, and which, oldest first."""

    noise: HistoryNoise
    past: tuple[PastRun, ...]


@dataclass(frozen=True, slots=True)
class ConcentrationEffect:
    """What a level or control reads with and without one reading; None where nothing is read.

    ``kind`` is 'level' (at its own response on the curve) or 'control'; ``name`` is that of a control.
    """

    kind: str
    name: str
    before: float | None
    after: float | None

    @property
    def relative_change(self) -> float | None:
        """Without over with the reading, minus 1."""
        if self.before is None or self.after is None or self.before == 0:
            return None
        return self.after / self.before - 1.0


@dataclass(frozen=True, slots=True)
class OutlyingProposal:
    """A reading that does not belong to its run, proposed to a person who may leave it out.

    Attributes
    ----------
    key, where, level
        Ordinal in the file, name and nominal concentration of the reading.
    studentised, limit : float
        Residual over its standard deviation, and the size it may have.
    against : str
        Whose scatter it was compared with.
    last_of_end_level : bool
        The only reading of an end level, which may not be left out.
    still_noisy : bool
        Whether the run scatters more than its history without it too: then it is not acceptable.
    effects : tuple of ConcentrationEffect
    """

    key: int
    where: str
    level: float
    studentised: float
    limit: float
    against: str
    last_of_end_level: bool
    still_noisy: bool
    effects: tuple[ConcentrationEffect, ...]


@dataclass(frozen=True, slots=True)
class Evaluation:
    """A run evaluated: nothing is stored yet.

    ``before`` holds the earlier curves where the method's exclusion rule left out standards, oldest first.
    ``history`` is what the noise model of the curve was pooled over, where it was; ``outlying`` a
    reading that is proposed to be left out.
    """

    curve: Curve
    standards: tuple[StandardRecord, ...]
    blanks: tuple[BlankRecord, ...]
    verdict: VerdictRecord
    quantities: tuple[QuantityRecord, ...]
    before: tuple[Evaluation, ...] = ()
    history: NoiseHistory | None = None
    outlying: OutlyingProposal | None = None
    basis: UncertaintyBasis = CURVE_ONLY


@dataclass(frozen=True, slots=True)
class RunHeading:
    """Who measured what, where and when, and from which file.

    ``at`` carries the local offset. ``void_reason`` is set when the run counts no longer.
    """

    id: int | None
    kind: str
    instrument: str
    instrument_kind: str
    serial: str
    location: str
    method: str
    method_version: int
    at: datetime
    operator: str
    by: str
    lot: str | None
    file: str
    fingerprint: str
    layout: str
    concentration_unit: str
    response_unit: str
    void_reason: str | None = None


@dataclass(frozen=True, slots=True)
class Amendment:
    """One later decision about a run: exclusion, refit, amendment, void."""

    at: datetime
    by: str
    what: str
    reason: str


@dataclass(frozen=True, slots=True)
class LotFacts:
    """What the certificate of a standard lot says; ``prepared`` names the solution made from it that was used."""

    name: str
    material: str
    certified_value: float | None
    unit: str | None
    expanded_uncertainty: float | None
    coverage_factor: float | None
    expiry: date | None
    certificate: str | None
    prepared: str | None = None

    @property
    def used(self) -> str:
        """Name of what the standards were made from."""
        return self.prepared or self.name


@dataclass(frozen=True, slots=True)
class ReportStamp:
    """What an issued report says of itself: number, when and by whom, and the report it replaces."""

    number: int
    at: datetime
    by: str
    replaces: int | None
    reason: str | None
    chain_sequence: int
    chain_head: str


@dataclass(frozen=True, slots=True)
class RunRecord:
    """A run as the store holds it now.

    A run of unknowns has no standards of its own; its curve is the one it names.
    ``dependents`` are runs of unknowns that were read on its curve.
    ``attempts_that_day`` counts the calibration runs of this instrument and method on
    the same local day, this one included; ``versions`` are those the curve was fitted with.
    """

    heading: RunHeading
    definition: MethodDefinition
    curve_id: int | None
    curve_run: int | None
    evaluation: Evaluation
    readings: tuple[Measured, ...]
    amendments: tuple[Amendment, ...]
    dependents: tuple[int, ...]
    curves_before: int
    attempts_that_day: int
    versions: Mapping[str, str]
    lot: LotFacts | None
    chain_sequence: int
    chain_head: str
    review: ReviewState = NO_REVIEW

    @property
    def lowest_reported(self) -> float | None:
        """Lowest concentration reported, undiluted."""
        return lowest_reported(self.definition, self.evaluation.verdict)


def lowest_reported(definition: MethodDefinition, verdict: VerdictRecord) -> float | None:
    """Lowest concentration reported, undiluted: the lowest standard in force or the reporting limit above it."""
    ends = [end for end in (verdict.lowest, definition.results.reporting_limit) if end is not None]
    return max(ends, default=None)
