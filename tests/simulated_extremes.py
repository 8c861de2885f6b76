"""Cases drawn to break an interval: curves of five models, partial and full, responses far beyond both ends."""

from __future__ import annotations

import numpy as np

from calib.curves.stack import fit_stack
from calib.models import response_model

MODELS = {
    "4PL": (0.05, 2.5, 100.0, 1.2),
    "5PL": (2.5, 0.05, 60.0, 1.4, 0.7),
    "saturation": (0.02, 2.4, 90.0),
    "squared-saturation": (0.02, 2.4, 90.0),
    "quenching": (0.0, 2.5, 0.02),
}
RESPONSES = 50


def wrong_cases(cases: int, seed: int) -> list[str]:
    """Cases that break the rule on open ends, in words; none should.

    No response beyond an end and no open end may come with a finite interval on that side, a U or a
    k; and every state must be one of those there are.
    """
    rng = np.random.default_rng(seed)
    wrong: list[str] = []
    per_model = max(cases // (RESPONSES * len(MODELS)), 1)
    for name, truth in MODELS.items():
        top = 1000.0 / 3.0 ** rng.integers(0, 5)
        x = np.repeat(top / 3.0 ** np.arange(7, -1, -1), 2)
        mean = response_model(name).response(x, truth)
        y = mean + 0.04 * rng.uniform(0.2, 3.0, (per_model, 1)) * np.abs(mean) ** 0.8 * rng.standard_normal(
            (per_model, x.size)
        )
        fixed = {"offset": 0.0} if name == "quenching" else {}
        for curve in fit_stack(x, y, model=name, fixed=fixed):
            if np.all(np.isfinite(curve.values)):
                wrong += _wrong(name, curve, rng)
    return wrong


def _wrong(name, curve, rng):
    y = rng.uniform(-1.5, 4.5, RESPONSES)
    q = curve.invert(y, replicates=int(rng.integers(1, 4)))
    state = np.array(q.state)
    closed = np.isfinite(q.lower) & (q.lower > 0) & np.isfinite(q.upper)
    plus_minus = np.isfinite(q.expanded) | np.isfinite(q.k)
    calm = np.isin(state, ["ok", "asymmetric"])
    faults = {
        "an unknown state": ~np.isin(
            state, ["ok", "asymmetric", "open-above", "open-below", "no-estimate", "off-curve"]
        ),
        "± beside a state that is not ok": plus_minus & (state != "ok"),
        "a closed state with an open end": calm & ~closed,
        "a finite two-sided interval without an estimate": ~calm & closed,
        "u beside an open end": np.isfinite(q.u) & ~calm,
        "an estimate outside its interval": calm & ~((q.lower <= q.value) & (q.value <= q.upper)),
    }
    return [f"{name}: {what} at y = {y[i]:g}" for what, bad in faults.items() for i in np.flatnonzero(bad)]
