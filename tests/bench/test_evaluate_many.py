"""Runs fitted as a stack come out as each does alone, whatever their levels are."""

import math
from dataclasses import replace

import numpy as np
import pytest
from small_laboratory import METHOD

from calib.bench.evaluate import evaluate
from calib.bench.evaluate_many import evaluate_many
from calib.bench.method_definition import read_definition
from calib.bench.records import Evaluation, Measured
from calib.curves.noise import assumed_noise

LEVELS = (0.5, 1.0, 2.0, 4.0, 8.0, 16.0, 32.0)
SAME = 1e-9  # inside the calibrated range; beyond it the curve is extrapolated, and with it its last digits


def readings(seed: int, levels: tuple[float, ...] = LEVELS) -> list[Measured]:
    """Three readings a level of a saturating response that scatters by 2 %, a blank, a check, samples."""
    chance = np.random.default_rng(seed)
    planned = [("standard", f"S{x:g}", x) for x in levels for _ in range(3)]
    planned += [("blank", "B", 0.0), ("check", "Q", 3.0), ("control", "C", 6.0)]
    planned += [("unknown", f"U{x:g}", x) for x in (0.2, 0.9, 3.0, 3.0, 12.0, 60.0)]
    return [
        Measured(
            key=key,
            sample=sample,
            role=role,
            concentration=x if role in ("standard", "check", "control") else None,
            response=(0.05 + 2.0 * x / (6.0 + x)) * (1.0 + 0.02 * chance.standard_normal()),
            absent_cause=None,
            dilution=10.0 if sample == "U12" else 1.0,
            position=None,
            excluded=None,
            saturated=False,
        )
        for key, (role, sample, x) in enumerate(planned, start=1)
    ]


def without(run: list[Measured], key: int, **fields: object) -> list[Measured]:
    return [replace(r, **fields) if r.key == key else r for r in run]


def runs() -> dict[int, list[Measured]]:
    """Six alike, one in another order, one with an exclusion, one with an absent reading, two with other levels."""
    found = {n: readings(n) for n in range(1, 7)}
    found[7] = readings(7)[::-1]
    found[8] = without(readings(8), 4, excluded="bubble")
    found[9] = without(readings(9), 7, response=None, absent_cause="overflow")
    found[10] = readings(10, (0.4, 0.9, 2.1, 3.7, 8.2, 17.0, 30.0))
    found[11] = readings(11, (0.5, 1.0, 4.0, 8.0, 32.0))
    return found


def close(a: float | None, b: float | None, share: float = SAME) -> bool:
    return a is b is None or (a is not None and b is not None and math.isclose(a, b, rel_tol=share))


def assert_same(many: Evaluation, alone: Evaluation) -> None:
    assert many.verdict.decision == alone.verdict.decision
    assert [c.passed for c in many.verdict.criteria] == [c.passed for c in alone.verdict.criteria]
    assert (many.verdict.lowest, many.verdict.highest) == (alone.verdict.lowest, alone.verdict.highest)
    assert [f.code for f in many.curve.findings] == [f.code for f in alone.curve.findings]
    assert close(many.curve.residual_sum, alone.curve.residual_sum)
    assert [s.key for s in many.standards] == [s.key for s in alone.standards]
    for ours, theirs in zip(many.standards, alone.standards, strict=True):
        assert close(ours.back_calculated, theirs.back_calculated)
    for ours, theirs in zip(many.quantities, alone.quantities, strict=True):
        assert (ours.sample, ours.state, ours.flags) == (theirs.sample, theirs.state, theirs.flags)
        for field in ("concentration", "estimate", "u", "lower", "upper"):
            share = SAME if ours.position == "inside" else 1e-7
            assert close(getattr(ours, field), getattr(theirs, field), share), field


@pytest.mark.parametrize("model", ["saturation", "4PL", "quadratic"])
@pytest.mark.parametrize("noise", ["uniform", "relative", "power-of-mean", assumed_noise("response", 1.0)])
def test_every_run_comes_out_as_it_does_alone(model, noise):
    definition = replace(
        read_definition(METHOD.format(name="m", analyte="a")), model=model, noise=noise, bounds={}
    )
    found = evaluate_many(definition, runs())
    assert list(found) == list(runs())
    for number, run in runs().items():
        assert_same(found[number], evaluate(definition, run))


def test_one_run_and_none_are_no_special_case():
    definition = replace(read_definition(METHOD.format(name="m", analyte="a")), model="saturation")
    assert evaluate_many(definition, {}) == {}
    assert_same(evaluate_many(definition, {1: readings(1)})[1], evaluate(definition, readings(1)))


def test_a_run_that_cannot_be_fitted_leaves_the_others_alone():
    definition = replace(read_definition(METHOD.format(name="m", analyte="a")), model="4PL")
    sparse = readings(2, (1.0, 8.0))
    empty = [r for r in readings(3) if r.role != "standard"]
    found = evaluate_many(definition, {1: readings(1), 2: sparse, 3: empty, 4: readings(4)})
    assert found[3] is None
    assert [f.code for f in found[2].curve.findings] == ["too-few-levels"]
    assert found[2].verdict.decision == "rejected"
    for number in (1, 4):
        assert_same(found[number], evaluate(definition, readings(number)))


def test_a_fitted_blank_takes_part():
    definition = replace(
        read_definition(METHOD.format(name="m", analyte="a")), model="saturation", fit_blank=True
    )
    found = evaluate_many(definition, {n: readings(n) for n in (1, 2)})
    assert found[1].curve.standards.concentration.min() == 0.0
    assert_same(found[1], evaluate(definition, readings(1)))
