"""Seeded random numbers: the core knows no others."""

from __future__ import annotations

import numpy as np

from calib.errors import InputError

# Where nobody gives a seed, this one is used and kept with the result.
SEED = 20260302


def seeded(seed: int) -> np.random.Generator:
    """Generator of one stream.

    Raises
    ------
    InputError
        When the seed is not a whole number of at least 0.
    """
    if isinstance(seed, bool) or not isinstance(seed, int | np.integer) or seed < 0:
        raise InputError(f"seed {seed!r} must be a whole number of at least 0")
    return np.random.default_rng(int(seed))
