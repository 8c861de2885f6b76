"""What went wrong in the season, on purpose, and what a method's limits must make of it."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from datetime import date
from itertools import cycle

from laboratory_truth import Cup

Cups = list[Cup]


def unchanged(cups: Cups) -> Cups:
    return cups


@dataclass(frozen=True, slots=True)
class Fault:
    """One planted day. `change` alters what is really in the cups; labels stay as the analyst believes."""

    instrument: str
    day: date
    label: str
    what: str
    expected: str
    decision: str  # 'accepted', 'rejected' or 'refused', as logged, before any person decides
    fails: tuple[str, ...] = ()  # setting keys of the criteria that must fail; others may fail too
    change: Callable[[Cups], Cups] = unchanged
    noise_factor: float = 1.0
    gain: float = 1.0
    unread: int | None = None  # the reading the instrument could not take, counted from 0
    layout: str | None = None
    copied: bool = False  # the same bytes come a second time, under another name


def mispipetted(cups: Cups) -> Cups:
    """A pipette that drew air: the standards hold anything but what the plan says."""
    factors = cycle((0.4, 1.9, 0.7, 2.4, 0.5, 1.6, 0.3, 1.3))
    return [
        replace(cup, content=cup.content * next(factors)) if cup.role in ("standard", "anchor") else cup
        for cup in cups
    ]


def exchanged_levels(cups: Cups) -> Cups:
    other = {33.0: 110.0, 110.0: 33.0}
    return [
        replace(cup, content=other.get(cup.content, cup.content)) if cup.role == "standard" else cup
        for cup in cups
    ]


def wrong_check(cups: Cups) -> Cups:
    return [replace(cup, content=2.0 * cup.content) if cup.role == "check" else cup for cup in cups]


def contaminated_blank(content: float) -> Callable[[Cups], Cups]:
    return lambda cups: [replace(cup, content=content) if cup.role == "blank" else cup for cup in cups]


def spilled(position: int) -> Callable[[Cups], Cups]:
    return lambda cups: [replace(cup, content=0.0) if at == position else cup for at, cup in enumerate(cups)]


FAULTS: tuple[Fault, ...] = (
    Fault(
        "PP-2",
        date(2026, 3, 18),
        "mis-pipetted plate",
        "a pipette drew air; every standard well holds 0.3 to 2.4 times its level",
        "rejected: most standards fail their relative error, and the residual sd is far above its limit",
        "rejected",
        fails=("standards_passing", "residual_sd"),
        change=mispipetted,
    ),
    Fault(
        "GB-4",
        date(2026, 3, 25),
        "exchanged levels",
        "the vessels of 33 and 110 ug/L stood in each other's places",
        "rejected: the two levels fail their relative error, and the residual sd is far above its limit",
        "rejected",
        fails=("standards_passing", "residual_sd"),
        change=exchanged_levels,
    ),
    Fault(
        "GB-4",
        date(2026, 4, 9),
        "spilled vessel",
        "V-08, one of three vessels of 33 ug/L, was knocked over and refilled with medium (see the event)",
        "rejected as logged, by the residual sd; accepted with exclusions once V-08 is excluded for its "
        "assignable cause",
        "rejected",
        fails=("residual_sd",),
        change=spilled(7),
    ),
    Fault(
        "OP-1",
        date(2026, 4, 14),
        "duplicated upload",
        "the file came a second time, the same bytes under another name",
        "the first file is accepted, the second refused as already logged",
        "accepted",
        copied=True,
    ),
    Fault(
        "EE-3",
        date(2026, 4, 16),
        "saturated detector",
        "the amplifier stood on its test gain of 2.2; the top standards lie at the ceiling or read OVRFLW",
        "rejected: standards are saturated or missing at the top",
        "rejected",
        fails=("saturated_standards",),
        gain=2.2,
    ),
    Fault(
        "PP-2",
        date(2026, 4, 22),
        "contaminated blank",
        "the blank wells took 0.8 ug/L from a badly washed trough",
        "rejected: the blanks lie above the blank limit",
        "rejected",
        fails=("blank",),
        change=contaminated_blank(0.8),
    ),
    Fault(
        "OP-1",
        date(2026, 4, 28),
        "decimal commas",
        "exported from another computer: semicolons and decimal commas, UTF-8 with a byte order mark",
        "accepted: the numbers are the same, only written otherwise",
        "accepted",
        layout="semicolon",
    ),
    Fault(
        "PP-2",
        date(2026, 4, 29),
        "unread well",
        "the reader could not read one well of the 0.7 ug/L standard and wrote ERR",
        "accepted: the reading is absent, two wells of that level are left",
        "accepted",
        unread=10,
    ),
    Fault(
        "OP-1",
        date(2026, 5, 6),
        "noisy day",
        "a blocked stirrer: every reading scatters eight times as much as usual",
        "rejected: the residual sd is far above its limit",
        "rejected",
        fails=("residual_sd",),
        noise_factor=8.0,
    ),
    Fault(
        "EE-3",
        date(2026, 5, 12),
        "wrong check standard",
        "both checks were made at twice the concentration on their labels",
        "rejected: the recovery of the checks is about 2",
        "rejected",
        fails=("check_recovery",),
        change=wrong_check,
    ),
    Fault(
        "GB-4",
        date(2026, 5, 19),
        "contaminated blank",
        "the blank vessels were filled with tap water that holds 35 ug/L of carbon",
        "rejected: the blanks lie above the blank limit",
        "rejected",
        fails=("blank",),
        change=contaminated_blank(35.0),
    ),
)
