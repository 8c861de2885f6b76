"""Multirule evaluation of control samples over runs.

Source: a multirule chart for quality control in clinical chemistry, 1981 (second-hand). R-4s is judged
within one run; the variant over the range of two runs signals more often and is not used.
"""

from collections.abc import Sequence
from dataclasses import dataclass

RULES = ("1-2s", "1-3s", "2-2s", "R-4s", "4-1s", "10-x")
CAUSES = {
    "1-2s": "one beyond 2 s: look closer",
    "1-3s": "one beyond 3 s: random error, or a large shift",
    "2-2s": "two in a row beyond 2 s on one side: systematic error",
    "R-4s": "one above +2 s and one below -2 s in the same run: random error",
    "4-1s": "four in a row beyond 1 s on one side: systematic error",
    "10-x": "ten in a row on one side of the mean: systematic error",
}
WARNING = "1-2s"
"""The one rule that only asks to look."""


@dataclass(frozen=True, slots=True)
class Signal:
    """A rule that fired at a run; ``materials`` are the control materials it fired on."""

    rule: str
    materials: tuple[str, ...]


def multirule(runs: Sequence[Sequence[tuple[str, float]]], count: int = 10) -> tuple[Signal, ...]:
    """Judge the last run by the rules, with the runs before it.

    Parameters
    ----------
    runs : sequence of runs, oldest first
        Each a sequence of (material, z), z the deviation from the material's mean in standard deviations.
        Several values of a material in a run keep their order.
    count : int
        Length of the row of the last rule; 8 and 12 are variants.

    Returns
    -------
    tuple of Signal
        In the order of `RULES`.
    """
    last = list(runs[-1]) if runs else []
    history = {material: _of(material, runs) for material, _ in last}
    found = [
        Signal("1-2s", _beyond(last, 2)),
        Signal("1-3s", _beyond(last, 3)),
        Signal("2-2s", _two(last, history)),
        Signal("R-4s", _opposite(last)),
        Signal("4-1s", tuple(m for m, z in history.items() if _row(z, 4, 1))),
        Signal("10-x", tuple(m for m, z in history.items() if _row(z, count, 0))),
    ]
    return tuple(signal for signal in found if signal.materials)


def _of(material: str, runs: Sequence[Sequence[tuple[str, float]]]) -> list[float]:
    return [z for run in runs for name, z in run if name == material]


def _beyond(last: Sequence[tuple[str, float]], limit: float) -> tuple[str, ...]:
    return tuple(dict.fromkeys(material for material, z in last if abs(z) > limit))


def _two(last: Sequence[tuple[str, float]], history: dict[str, list[float]]) -> tuple[str, ...]:
    """Two in a row of one material, or two materials in the run, beyond the same 2 s side."""
    found = [material for material, z in history.items() if _row(z, 2, 2)]
    for side in (1, -1):
        together = list(dict.fromkeys(material for material, z in last if side * z > 2))
        if len(together) > 1:
            found += together
    return tuple(dict.fromkeys(found))


def _opposite(last: Sequence[tuple[str, float]]) -> tuple[str, ...]:
    high = [material for material, z in last if z > 2]
    low = [material for material, z in last if z < -2]
    return tuple(dict.fromkeys(high + low)) if high and low else ()


def _row(values: Sequence[float], length: int, beyond: float) -> bool:
    """Whether the last so many values all lie beyond one side."""
    tail = values[-length:]
    return len(tail) == length and (all(z > beyond for z in tail) or all(z < -beyond for z in tail))
