"""The laboratory's own evidence: simulate a method as it is, and count what its rules and intervals do."""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, replace

import numpy as np

from calib import store as tables
from calib.bench.evaluate_many import evaluate_many
from calib.bench.method_definition import MethodDefinition
from calib.bench.method_history import MethodHistory, history_of_method
from calib.bench.planted_faults import CLEAN, FAULTS, Fault
from calib.bench.proof_records import Proof, ProvenCell, ProvenCriterion, Scenario, Share
from calib.bench.records import Evaluation, QuantityRecord
from calib.bench.simulated_runs import (
    CURVES,
    Asked,
    RunPlan,
    Truth,
    plan_of,
    simulated_history,
    simulated_runs,
    truth_of,
    usual_replicates,
)
from calib.curves.chance import SEED, seeded
from calib.curves.noise import NoiseModel
from calib.errors import InputError

Progress = Callable[[int, int], None]

# Clean runs; each fault happens in a quarter of them, as it takes fewer to see what a criterion does.
RUNS, FEWEST, SHARE_FAULTY = 1000, 20, 4
# Runs simulated and fitted as one stack; a method that pools its noise gets a new history for each.
BATCH = 100
REPLICATES = (1, 2, 3)
# Where unknowns lie, as shares of the way from the lowest to the highest standard (in ln x where the
# model lives there): both ends, near them, and between.
OVER_RANGE = (0.0, 0.04, 0.12, 0.3, 0.5, 0.7, 0.88, 0.96, 1.0)
IN_FAULTY = (0.2, 0.5, 0.8)
HISTORY = "history"
FIRST_SEED = SEED


def _silent(done: int, total: int) -> None:
    """No one is watching."""


def prove_method(
    store: tables.Store,
    method: str,
    instrument: str | None = None,
    *,
    runs: int = RUNS,
    seed: int = FIRST_SEED,
    progress: Progress = _silent,
) -> Proof:
    """Simulate a method as it is; the store is only read.

    Runs look like the last accepted one and go through the functions of a working day: fitted as a
    stack, judged, inverted. Their true curves are those of the last 10 accepted runs, in turn; their
    noise is pooled over the accepted runs where there are at least 5, else it is what the method
    assumes with the residual standard deviation of its runs. Levels are exact and the model is true.

    Parameters
    ----------
    instrument : str, optional
        Needed where several instruments have runs of the method.
    runs : int
        Clean runs; a quarter of them, and at least 20, with each fault.
    seed : int
        The same seed gives the same figures.
    progress : callable
        Called with the number of runs done and in all.

    Raises
    ------
    NotFound
        For an unknown method or instrument, and without an accepted run.
    InputError
        For too few runs, a seed that is none, an instrument to be named, or runs without scatter.
    """
    if runs < FEWEST:
        raise InputError(f"{runs} runs prove nothing; give at least {FEWEST}")
    seeded(seed)
    history = history_of_method(store, method, instrument)
    truth = truth_of(history)
    over_range = [Asked(x, m) for m in REPLICATES for x in _concentrations(history, OVER_RANGE)]
    usual = usual_replicates(history)
    in_faulty = [Asked(x, usual) for x in _concentrations(history, IN_FAULTY)]
    faulty = max(runs // SHARE_FAULTY, FEWEST)
    total, done = runs + faulty * len(FAULTS), 0
    tallies = []
    for number, fault in enumerate((CLEAN, *FAULTS)):
        plan = plan_of(history, over_range if fault is CLEAN else in_faulty)
        tally = _Tally(fault, plan.asked)
        rng = np.random.default_rng([seed, number])
        for evaluations in _evaluated(history, truth, plan, fault, runs if fault is CLEAN else faulty, rng):
            tally.add(evaluations)
            done += len(evaluations)
            progress(done, total)
        tallies.append(tally)
    return _proof(history, truth, seed, tallies)


def _concentrations(history: MethodHistory, shares: Sequence[float]) -> list[float]:
    """Concentrations at shares of the calibrated range of the last accepted run."""
    low, high = _range(history)
    way = np.asarray(shares)
    if history.latest.curve.response_model.logarithmic:
        return [float(x) for x in low * (high / low) ** way]
    return [float(x) for x in low + (high - low) * way]


def _range(history: MethodHistory) -> tuple[float, float]:
    verdict = history.latest.verdict
    if verdict.lowest is None or verdict.highest is None or not verdict.lowest < verdict.highest:
        raise InputError(
            f"run {history.latest.run.id}, the last accepted one, has no calibrated range; log standards at "
            "two levels or more"
        )
    return verdict.lowest, verdict.highest


def _evaluated(
    history: MethodHistory, truth: Truth, plan: RunPlan, fault: Fault, runs: int, rng: np.random.Generator
) -> Iterator[list[Evaluation | None]]:
    for start in range(0, runs, BATCH):
        definition = _as_practised(history.definition, truth, plan, rng)
        batch = simulated_runs(truth, plan, fault, min(BATCH, runs - start), rng)
        yield list(evaluate_many(definition, batch).values())


def _as_practised(
    definition: MethodDefinition, truth: Truth, plan: RunPlan, rng: np.random.Generator
) -> MethodDefinition:
    """The method, with a noise model of its own history where it pools one and has enough of it."""
    if definition.noise != HISTORY or not truth.pooled:
        return definition
    settings = {"fixed": definition.fixed, "bounds": definition.bounds}
    return replace(definition, noise=simulated_history(truth, plan, settings, rng))


@dataclass
class _Tally:
    """Counts over the runs of one scenario."""

    fault: Fault
    asked: tuple[Asked, ...]

    def __post_init__(self) -> None:
        self.runs = self.rejected = self.with_exclusions = 0
        self.fired: Counter[str] = Counter()
        self.criteria: dict[str, ProvenCriterion] = {}
        self.read: list[list[QuantityRecord]] = [[] for _ in self.asked]

    def add(self, evaluations: Sequence[Evaluation | None]) -> None:
        """Count a batch of runs; one that could not be fitted is rejected."""
        self.runs += len(evaluations)
        for evaluation in evaluations:
            if evaluation is None:
                self.rejected += 1
                continue
            verdict = evaluation.verdict
            self.rejected += not verdict.accepted
            self.with_exclusions += verdict.decision == "accepted with exclusions"
            for c in verdict.criteria:
                self.criteria.setdefault(c.id, ProvenCriterion(c.id, c.what, c.warns))
                self.fired[c.id] += not c.passed
            if verdict.accepted:
                self._read(evaluation.quantities)

    def _read(self, quantities: Sequence[QuantityRecord]) -> None:
        for q in quantities:
            number = int(q.nominal or 0)
            if q.role == "unknown" and number < len(self.asked):
                self.read[number].append(q)

    @property
    def scenario(self) -> Scenario:
        """The counts as shares."""
        covered = [
            _covers(q, a.concentration) for a, read in zip(self.asked, self.read, strict=True) for q in read
        ]
        return Scenario(
            self.fault.key,
            self.fault.words,
            Share(self.rejected, self.runs),
            Share(self.with_exclusions, self.runs),
            Share(sum(c == 0 for c in covered), len(covered)),
            {key: Share(self.fired[key], self.runs) for key in self.criteria},
        )

    @property
    def cells(self) -> Iterator[ProvenCell]:
        """What was read of each known sample."""
        return (_cell(a, read) for a, read in zip(self.asked, self.read, strict=True))


def _covers(q: QuantityRecord, truth: float) -> int | None:
    """0 where the interval holds the truth, −1 or 1 where it lies below or above it, None where there is none."""
    if q.state == "off-curve":
        return None
    if q.lower is not None and q.lower > truth:
        return 1
    return -1 if q.upper is not None and q.upper < truth else 0


def _cell(asked: Asked, read: Sequence[QuantityRecord]) -> ProvenCell:
    x, n = asked.concentration, len(read)
    covers = [_covers(q, x) for q in read]
    values = [
        v for q in read if (v := q.estimate if q.concentration is None else q.concentration) is not None
    ]
    length = float(np.median([_length(q) for q in read])) / x if n else np.inf
    return ProvenCell(
        concentration=x,
        replicates=asked.replicates,
        covered=Share(covers.count(0), n),
        missed_below=Share(covers.count(1), n),
        missed_above=Share(covers.count(-1), n),
        bias=float(np.median(values)) / x - 1.0 if values else None,
        relative_length=length if np.isfinite(length) else None,
        open=Share(sum(q.state in ("open-above", "open-below", "no-estimate") for q in read), n),
        missing=Share(sum(q.concentration is None for q in read), n),
    )


def _length(q: QuantityRecord) -> float:
    closed = q.state in ("ok", "asymmetric") and q.lower is not None and q.upper is not None
    return q.upper - q.lower if closed and q.upper is not None and q.lower is not None else np.inf


def _proof(history: MethodHistory, truth: Truth, seed: int, tallies: Sequence[_Tally]) -> Proof:
    definition, noise = history.definition, history.definition.noise
    readings = history.latest.readings
    levels = Counter(r.concentration or 0.0 for r in readings if r.role == "standard")
    return Proof(
        method=definition.name,
        version=history.version,
        instrument=history.instrument,
        model=definition.model,
        concentration_unit=definition.concentration_unit,
        confidence=definition.interval_confidence,
        seed=seed,
        noise=truth.noise.label,
        noise_source=_source(history, truth),
        residual_sd=truth.sd,
        method_noise=noise.label if isinstance(noise, NoiseModel) else noise,
        curves=tuple(a.run.id for a in history.accepted[-CURVES:]),
        levels=tuple(sorted(levels.items())),
        calibrated=_range(history),
        asked_of_faulty=tuple(_concentrations(history, IN_FAULTY)),
        usual_replicates=usual_replicates(history),
        cells=tuple(tallies[0].cells),
        scenarios=tuple(t.scenario for t in tallies),
        criteria=tuple({k: c for t in tallies for k, c in t.criteria.items()}.values()),
    )


def _source(history: MethodHistory, truth: Truth) -> str:
    if truth.pooled:
        return f"pooled over {truth.pooled} accepted runs"
    n = len(history.accepted)
    runs = "1 accepted run" if n == 1 else f"{n} accepted runs"
    return f"as the method assumes, with the residual SD of {runs}"
