"""Replicates of one unknown against the noise of the curve."""

from __future__ import annotations

import numpy as np
import pytest
from made_curves import LEVELS, RISING, assay_curve

import calib
from calib.models import response_model
from calib.quantification.replicates import replicates_disagree

# F(0.99; 1, 12) and chi-square(0.99; 1), as any printed table has them (from memory).
F_1_12 = 9.330
CHI_SQUARE_1 = 6.635


@pytest.mark.parametrize(("factor", "expected"), [(0.995, False), (1.005, True)])
def test_two_replicates_disagree_from_the_printed_f_quantile_on(factor: float, expected: bool) -> None:
    """The variance of a pair is half its squared difference."""
    curve = assay_curve()
    half = factor * np.sqrt(F_1_12 / 2.0) * curve.residual_sd
    assert replicates_disagree(curve, [1.2 - half, 1.2 + half]) is expected


@pytest.mark.parametrize(("factor", "expected"), [(0.995, False), (1.005, True)])
def test_with_known_uncertainty_the_chi_square_quantile_decides(factor: float, expected: bool) -> None:
    curve = calib.fit(LEVELS, response_model("4PL").response(LEVELS, RISING), u=0.02)
    half = factor * np.sqrt(CHI_SQUARE_1 / 2.0) * 0.02
    assert replicates_disagree(curve, [1.2 - half, 1.2 + half]) is expected


def test_the_noise_at_the_mean_response_counts() -> None:
    """Relative noise: the same difference disagrees where responses are small only."""
    y = response_model("4PL").response(LEVELS, RISING) * np.tile([0.97, 1.03], 8)
    curve = calib.fit(LEVELS, y, noise="relative")
    assert replicates_disagree(curve, [0.2, 0.3])
    assert not replicates_disagree(curve, [2.2, 2.3])


def test_a_curve_without_noise_accuses_nobody() -> None:
    curve = calib.fit([1, 2], [2.0, 4.0], model="line")
    assert not replicates_disagree(curve, [2.0, 3.0])
