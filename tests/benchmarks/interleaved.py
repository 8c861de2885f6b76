"""Timings as ratios: rounds in which every candidate runs once, in turn, so that a slow spell hits all."""

import statistics
import subprocess
import sys
import time
from collections.abc import Callable, Mapping

ROUNDS = 11


def measure(candidates: Mapping[str, Callable[[], object]], rounds: int = ROUNDS) -> dict[str, list[float]]:
    """Seconds of each candidate, one value a round; the first round warms up and is dropped."""
    seconds: dict[str, list[float]] = {name: [] for name in candidates}
    for _ in range(rounds + 1):
        for name, run in candidates.items():
            began = time.perf_counter()
            run()
            seconds[name].append(time.perf_counter() - began)
    return {name: values[1:] for name, values in seconds.items()}


def ratios(seconds: Mapping[str, list[float]], name: str, reference: str) -> tuple[float, float, float]:
    """Median, lowest and highest ratio of a candidate to the reference, round by round."""
    each = [a / b for a, b in zip(seconds[name], seconds[reference], strict=True)]
    return statistics.median(each), min(each), max(each)


def process(*arguments: str, env: Mapping[str, str] | None = None) -> Callable[[], object]:
    """A candidate that runs this Python with arguments in a fresh process."""

    def run() -> None:
        subprocess.run([sys.executable, *arguments], check=True, capture_output=True, env=env)

    return run
