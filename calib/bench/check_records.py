"""Check the store: its chain and integrity, and whether stored curves come out again."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from sqlalchemy import select

from calib import store as tables
from calib.bench.damage import Damage, damage_of
from calib.bench.keeping import versions
from calib.bench.outlying_readings import evaluate_and_check
from calib.bench.records import RunRecord, StandardRecord
from calib.bench.show_run import load_run
from calib.errors import CalibError
from calib.store.heads import KeptHead

# Two fits of the same readings agree to this share of a value inside the calibrated range.
SAME_DIGITS = 1e-9
SAMPLE = 20

Progress = Callable[[int, int], None]


@dataclass(frozen=True, slots=True)
class RecordFinding:
    """Something that is wrong, where, and in words."""

    code: str
    place: str
    message: str
    entry: int | None = None


@dataclass(frozen=True, slots=True)
class RecordCheck:
    """Outcome of a check of the whole store.

    Attributes
    ----------
    entries, rows, curves : int
        Entries of the record chain, rows and curves that were checked.
    head_sequence, head_hash
        Last entry of the chain.
    damage : Damage or None
        The first entry that no longer holds, and what rests on what was found.
    """

    findings: tuple[RecordFinding, ...]
    entries: int
    rows: int
    curves: int
    head_sequence: int
    head_hash: str
    damage: Damage | None = None

    @property
    def sound(self) -> bool:
        """Whether nothing was found."""
        return not self.findings


def _silent(done: int, total: int) -> None:
    """No one is watching."""


def check_records(
    store: tables.Store,
    *,
    all_curves: bool = False,
    progress: Progress = _silent,
    heads: Sequence[KeptHead] = (),
) -> RecordCheck:
    """Walk the chain and the rows, then fit stored curves again and compare the digits.

    Parameters
    ----------
    all_curves : bool
        Fit every curve in force again, not an evenly spread sample.
    progress : callable
        Called with the number of rows done and in all.
    heads : sequence of KeptHead
        Heads kept elsewhere, to compare the chain with.
    """
    from calib.store import check_store

    check = check_store(store, progress, heads)
    findings = [RecordFinding(f.code, f.place, f.message, f.entry) for f in check.findings]
    numbers = _calibration_runs(store) if check.sound else []
    if not all_curves and len(numbers) > SAMPLE:
        numbers = [numbers[int(i)] for i in np.linspace(0, len(numbers) - 1, SAMPLE)]
    findings.extend(f for n in numbers if (f := refit_again(store, n)) is not None)
    return RecordCheck(
        tuple(findings),
        check.entries,
        check.rows,
        len(numbers),
        check.head_sequence,
        check.head_hash,
        damage_of(store, findings),
    )


def _calibration_runs(store: tables.Store) -> list[int]:
    with store.reading() as session:
        query = select(tables.Run.id).where(tables.Run.kind == "calibration").order_by(tables.Run.id)
        return list(session.scalars(query))


def refit_again(store: tables.Store, number: int) -> RecordFinding | None:
    """Why the curve of a run does not come out again, or None when it does."""
    place = f"run {number}"
    try:
        with store.reading() as session:
            record = load_run(session, number, (0, ""))
            row = session.get_one(tables.Curve, record.curve_id)
        again = evaluate_and_check(record.definition, record.readings, record.evaluation.history)
    except CalibError as cause:
        return RecordFinding("curve-unreadable", place, str(cause))
    difference = _difference(record, again.standards)
    if difference <= SAME_DIGITS and again.verdict.decision == record.evaluation.verdict.decision:
        return None
    here = ", ".join(f"{k} {v}" for k, v in versions().items())
    then = ", ".join(f"{k} {v}" for k, v in row.versions.items())
    return RecordFinding(
        "curve-differs",
        place,
        f"curve {record.curve_id} does not come out again: back-calculated values differ by {difference:.1e} "
        f"(fitted with {then}; now {here})",
    )


def _difference(record: RunRecord, standards: Sequence[StandardRecord]) -> float:
    """Largest relative difference of back-calculated values inside the calibrated range."""
    verdict = record.evaluation.verdict
    pairs = [
        (old.back_calculated, new.back_calculated)
        for old, new in zip(record.evaluation.standards, standards, strict=True)
    ]
    if any((a is None) != (b is None) for a, b in pairs):
        return float("inf")
    low, high = verdict.lowest or 0.0, verdict.highest or np.inf
    inside = [(a, b) for a, b in pairs if a is not None and b is not None and low <= a <= high]
    return max((abs(b / a - 1.0) for a, b in inside if a), default=0.0)
