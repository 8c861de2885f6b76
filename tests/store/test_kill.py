"""A program killed at any moment leaves the store before or after, never between (full size: benchmarks/kill.py)."""

import os
import random
from pathlib import Path

import pytest
from killing import DEEDS, Outcome, examine, kill_at_random, prepare

KILLS = 2


@pytest.mark.skipif(os.name != "posix", reason="there is no SIGKILL")
@pytest.mark.parametrize("deed", DEEDS)
def test_a_killed_program_loses_nothing_and_leaves_nothing_half(
    deed: str, tmp_path: Path, registered_store: Path
) -> None:
    path = prepare(tmp_path, registered_store)
    chance, outcome = random.Random(f"{deed}"), Outcome()
    for mark in range(KILLS):
        examine(path, deed, kill_at_random(path, deed, mark, 0.6, chance), outcome)
    assert outcome.kills[deed] == KILLS
    assert (outcome.lost, outcome.half, outcome.unsound) == ([], [], [])
