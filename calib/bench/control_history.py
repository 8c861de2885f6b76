"""Controls and checks of a run against those of the runs before it: the multirule evaluation."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from sqlalchemy import select

from calib import store as tables
from calib.acceptance.multirule import CAUSES, WARNING, Signal, multirule
from calib.bench.find import facts_of, run_numbered

ROLES = ("control", "check", "first-check")
BASELINE_RUNS = 20
FEWEST_RUNS = 10
LOOK_BACK = 12
"""Runs the longest rule may need, with variants."""


@dataclass(frozen=True, slots=True)
class ControlHistory:
    """What the multirule makes of a run.

    Attributes
    ----------
    signals : tuple of Signal
    baseline : mapping of str to int
        Runs the mean and standard deviation of each material of the run come from; 0 where there are too few.
    """

    signals: tuple[Signal, ...]
    baseline: Mapping[str, int]

    @property
    def lines(self) -> tuple[str, ...]:
        """The signals in words."""
        return tuple(
            f"{s.rule}: {CAUSES[s.rule]} ({', '.join(s.materials)})"
            + (" - a warning" if s.rule == WARNING else "")
            for s in self.signals
        )


def control_history(store: tables.Store, number: int) -> ControlHistory:
    """Judge the controls and checks of a run by the multirule, with the runs before it.

    A material is a role and a nominal concentration. Its mean and standard deviation of ln(found/nominal)
    come from its first 20 runs before this one with an accepted curve; below 10 it is not judged. Void runs and those
    with a rejected curve are left out, the run itself never is.

    Raises
    ------
    NotFound
        When there is no such run.
    """
    by_run = _recoveries(store, number)
    baselines = {material: _baseline(material, by_run[:-1]) for material in _materials(by_run[-1:])}
    known = {m: b for m, b in baselines.items() if b is not None}
    scored = [
        [(m, (v - known[m][0]) / known[m][1]) for m, v in run if m in known] for run in by_run[-LOOK_BACK:]
    ]
    counts = {m: 0 if b is None else b[2] for m, b in baselines.items()}
    return ControlHistory(multirule(scored) if scored else (), counts)


def _recoveries(store: tables.Store, number: int) -> list[list[tuple[str, float]]]:
    """(material, ln recovery) of every run up to this one, oldest first; this one last."""
    q = tables.QuantityRow
    with store.reading() as session:
        run = run_numbered(session, number)
        facts = facts_of(session, number)
        method = session.get_one(tables.Method, run.method_id).name
        rows = session.execute(
            select(tables.Run.id, q.role, q.nominal, q.concentration)
            .join(tables.RunFacts, tables.RunFacts.run_id == tables.Run.id)
            .join(tables.Method, tables.Method.id == tables.Run.method_id)
            .join(q, q.run_id == tables.Run.id)
            .join(tables.VerdictRow, tables.VerdictRow.curve_id == q.curve_id)
            .outerjoin(tables.RunVoid, tables.RunVoid.run_id == tables.Run.id)
            .where(
                tables.is_current(tables.RunFacts),
                tables.is_current(q),
                q.role.in_(ROLES),
                tables.RunFacts.instrument_id == facts.instrument_id,
                tables.Method.name == method,
                tables.RunFacts.at <= facts.at,
                tables.RunVoid.id.is_(None) | (tables.Run.id == number),
                (tables.VerdictRow.decision != "rejected") | (tables.Run.id == number),
            )
            .order_by(tables.RunFacts.at, tables.Run.id, q.id)
        ).all()
    grouped: dict[int, list[tuple[str, float]]] = {}
    for run_id, role, nominal, found in rows:
        if nominal and found is not None and found > 0:
            grouped.setdefault(run_id, []).append((f"{role} {nominal:g}", math.log(found / nominal)))
    last = grouped.pop(number, [])
    return [*grouped.values(), last]


def _materials(runs: Sequence[Sequence[tuple[str, float]]]) -> list[str]:
    return list(dict.fromkeys(material for run in runs for material, _ in run))


def _baseline(material: str, runs: Sequence[Sequence[tuple[str, float]]]) -> tuple[float, float, int] | None:
    """Mean, standard deviation and number of the material's first runs; None below the fewest."""
    means = [np.mean(values) for run in runs if (values := [v for name, v in run if name == material])]
    first = np.array(means[:BASELINE_RUNS])
    if first.size < FEWEST_RUNS:
        return None
    sd = float(first.std(ddof=1))
    return (float(first.mean()), sd, int(first.size)) if sd > 0 else None
