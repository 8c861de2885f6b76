"""Days of a method that takes its noise from its history: standards that scatter by a share of their response."""

from __future__ import annotations

from datetime import datetime, timedelta

import numpy as np
from small_laboratory import METHOD, Bench, Line, header_block, signal, unknown

FIRST = datetime.fromisoformat("2026-03-02T08:00:00+02:00")
LEVELS = (1.0, 2.0, 4.0, 6.0, 8.0, 10.0)


def day(number: int, sd: float = 0.01, odd: float = 0.0) -> list[Line]:
    """Standards that scatter by a share of their response; ``odd`` is added to the last reading."""
    rng = np.random.default_rng(number)
    lines = [
        Line(f"S{n}", "standard", level, signal(level) * (1 + sd * rng.standard_normal()))
        for n, level in enumerate(LEVELS * 2, start=1)
    ]
    lines[-3] = Line(lines[-3].sample, "standard", lines[-3].level, lines[-3].response + odd)
    return [*lines, unknown("U1", 3.0), unknown("U1", 3.02)]


ASKING = (
    METHOD.format(name="line-a", analyte="alpha")
    .replace('"uniform"', '"history"')
    .replace("residual_sd = 0.2", "relative_error = 0.2")
)


def started(number: int) -> str:
    return (FIRST + timedelta(days=number)).isoformat()


def file_of(number: int, **settings: float) -> str:
    return header_block(day(number, **settings), started=started(number))


def log_day(bench: Bench, number: int, **settings: float):
    return bench.log(day(number, **settings), name=f"day-{number}.csv", started=started(number))
