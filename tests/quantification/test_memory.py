"""Working memory stays flat: what is held beside input and result does not grow with the unknowns."""

from __future__ import annotations

import tracemalloc

import numpy as np
import pytest
from made_curves import assay_curve


def working_memory(interval: str, unknowns: int) -> int:
    """Peak of the allocations minus what the result holds, in bytes."""
    curve = assay_curve()
    y = np.random.default_rng(1).uniform(0.1, 2.4, unknowns)
    curve.invert(y[:10], interval=interval)
    tracemalloc.start()
    try:
        quantity = curve.invert(y, interval=interval)
        held, peak = tracemalloc.get_traced_memory()
    finally:
        tracemalloc.stop()
    assert len(quantity.state) == unknowns
    return peak - held


@pytest.mark.parametrize(("interval", "unknowns"), [("delta", 20_000), ("inversion", 5_000)])
def test_three_times_the_unknowns_need_hardly_more(interval: str, unknowns: int) -> None:
    assert working_memory(interval, 3 * unknowns) <= 1.5 * working_memory(interval, unknowns)
