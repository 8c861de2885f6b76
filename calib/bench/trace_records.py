"""What a trace consists of: things, and how one leads to the next."""

from __future__ import annotations

from dataclasses import dataclass, field


@dataclass(frozen=True, slots=True)
class Traced:
    """One thing on the way from a certificate to a report.

    Attributes
    ----------
    key : str
        Table and number of its row, such as 'curve 12'.
    stage : int
        How far along the way it lies: 0 origin, 1 material and file, 2 calibration run,
        3 curve, 4 run of the sample, 5 quantity, 6 review, 7 report.
    title : str
    facts : tuple of (name, value)
        What is recorded of it, in words.
    superseded_by : str or None
        Key of the row that replaced it, if it is no longer in force.
    entry : int or None
        Entry of the record chain that recorded it.
    """

    key: str
    stage: int
    title: str
    facts: tuple[tuple[str, str], ...]
    superseded_by: str | None = None
    entry: int | None = None


@dataclass(frozen=True, slots=True)
class Step:
    """One thing leads to another."""

    source: str
    target: str


@dataclass(frozen=True, slots=True)
class Trace:
    """The things that stand behind a result, or follow from a thing, and the head of the record chain."""

    start: str
    things: tuple[Traced, ...]
    steps: tuple[Step, ...]
    chain_sequence: int
    chain_head: str


@dataclass(slots=True)
class Tracing:
    """Collects the things and steps of a trace, each once."""

    things: dict[str, Traced] = field(default_factory=dict)
    steps: dict[Step, None] = field(default_factory=dict)

    def add(self, thing: Traced, leads_to: str | None = None) -> str:
        """Add a thing, and the step from it to one that is there; its key."""
        self.things.setdefault(thing.key, thing)
        if leads_to is not None:
            self.steps[Step(thing.key, leads_to)] = None
        return thing.key

    def finished(self, start: str, head: tuple[int, str]) -> Trace:
        """The trace, in the order of the way."""
        ordered = sorted(self.things.values(), key=lambda t: t.stage)
        return Trace(start, tuple(ordered), tuple(self.steps), *head)
