"""Input that cannot be used is refused in one line with index, value and remedy."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

import calib
from calib.errors import CalibError, InputError, MethodError, ModelError

X = [1.0, 2.0, 4.0, 8.0, 16.0]
Y = [0.1, 0.5, 0.9, 1.2, 1.3]


def replaced(values: list[float], index: int, value: float) -> list[float]:
    return [value if i == index else v for i, v in enumerate(values)]


REFUSED: list[tuple[str, type[CalibError], str, dict[str, Any]]] = [
    ("nan response", InputError, r"response\[2\] is nan; leave that reading out", {"response": replaced(Y, 2, np.nan)}),
    ("inf response", InputError, r"response\[0\] is inf", {"response": replaced(Y, 0, np.inf)}),
    ("nan level", InputError, r"concentration\[4\] is nan", {"concentration": replaced(X, 4, np.nan)}),
    ("negative level", InputError, r"\[1\] = -2 is negative.*x >= 0", {"concentration": replaced(X, 1, -2)}),
    ("unequal lengths", InputError, "4 concentrations for 5 responses; give one each", {"concentration": X[:4]}),
    ("nothing", InputError, "no standards", {"concentration": [], "response": []}),
    ("words", InputError, "response holds something that is no number", {"response": ["a"] * 5}),
    ("two columns", InputError, "takes one concentration a reading", {"concentration": np.ones((5, 2))}),
    ("table of responses", InputError, r"one-dimensional, got shape \(1, 5\)", {"response": [Y]}),
    ("unknown model", ModelError, "unknown response model '6PL'; known are", {"model": "6PL"}),
    ("unknown fixed", ModelError, r"fixed names 'top'.*zero, infinite, midpoint, slope", {"fixed": {"top": 1.0}}),
    ("unknown bound", ModelError, "bounds names 'top'", {"bounds": {"top": (0, 1)}}),
    ("unknown start", ModelError, "start names 'top'", {"start": {"top": 1.0}}),
    ("start of nan", ModelError, "start of slope = nan must be finite", {"start": {"slope": np.nan}}),
    ("start below zero", ModelError, "start of midpoint = -3 must be above 0", {"start": {"midpoint": -3.0}}),
    ("bounds upside down", ModelError, r"lower < upper, got \(3, 1\)", {"bounds": {"slope": (3, 1)}}),
    ("bound below zero", ModelError, "must allow values above 0", {"bounds": {"midpoint": (-3, -1)}}),
    ("fixed at nan", ModelError, "finite value", {"fixed": {"zero": np.nan}}),
    ("fixed slope below zero", ModelError, "fixed slope = -1 lies outside", {"fixed": {"slope": -1.0}}),
    ("nothing free", ModelError, "all parameters .* are fixed", {"model": "proportional", "fixed": {"slope": 1.0}}),
    ("unknown solver", ModelError, "unknown solver 'magic'; known are least-squares, simplex", {"solver": "magic"}),
    ("unknown noise", MethodError, "unknown noise model 'loud'; known are uniform, relative", {"noise": "loud"}),
    ("history", MethodError, "known to a method alone.*calib.pool_noise", {"noise": "history"}),
    ("two scales", InputError, "u \\(known\\) or relative_sd.*not both", {"u": np.ones(5), "relative_sd": np.ones(5)}),
    ("two noises", MethodError, "leave noise at 'uniform'", {"u": np.ones(5), "noise": "relative"}),
    ("u too short", InputError, r"u has shape \(3,\) for 5 standards", {"u": np.ones(3)}),
    ("u of zero", InputError, r"u\[1\] = 0.0 must be finite and above 0", {"u": [1, 0, 1, 1, 1]}),
    ("sd of nan", InputError, r"relative_sd\[3\] = nan must be", {"relative_sd": [1, 1, 1, np.nan, 1]}),
]  # fmt: skip


@pytest.mark.parametrize(
    ("kind", "message", "settings"), [r[1:] for r in REFUSED], ids=[r[0] for r in REFUSED]
)
def test_refused(kind: type[CalibError], message: str, settings: dict[str, Any]) -> None:
    with pytest.raises(kind, match=message) as refusal:
        calib.fit(**{"concentration": X, "response": Y, "model": "4PL"} | settings)
    assert "\n" not in str(refusal.value)


def test_a_plain_axis_takes_negative_concentrations() -> None:
    curve = calib.fit([-2.0, -1.0, 0.0, 1.0, 2.0], [-4.0, -2.1, 0.1, 2.0, 4.1], model="line")
    assert curve.converged
