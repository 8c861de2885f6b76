"""What is really so in the fictional laboratory: response laws, ageing, noise, and what is in every cup."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from datetime import date
from math import exp, log, prod

import numpy as np

SEED = 20260302
FIRST_DAY = date(2026, 3, 2)

Parameters = Mapping[str, float]
RandomState = np.random.RandomState


@dataclass(frozen=True, slots=True)
class Cup:
    """One well, cup or vessel: what its label says and the concentration really in it."""

    sample: str
    role: str
    nominal: float | None
    content: float
    dilution: float = 1.0


@dataclass(frozen=True, slots=True)
class Parameter:
    """A true parameter: start value, slow change a day (fraction), scatter from day to day (fraction)."""

    start: float
    daily_change: float
    daily_scatter: float


@dataclass(frozen=True, slots=True)
class Step:
    """A sudden lasting change: from this day the named parameters are new, times these factors."""

    day: date
    what: str
    factors: Parameters
    renewed: bool  # True where a worn part was replaced: its ageing starts again


@dataclass(frozen=True, slots=True)
class Plan:
    """How one instrument's day looks."""

    ordinal: int
    response: Callable[[float, Parameters], float]
    parameters: Mapping[str, Parameter]
    steps: tuple[Step, ...]
    noise: str
    noise_sd: float
    deviation: Callable[[float], float]  # standard deviation of a reading in units of noise_sd
    standards: tuple[float, ...]
    anchors: tuple[float, ...]
    replicates: int
    blanks: int
    blank_content: float
    zeros: int
    checks: tuple[tuple[str, float], ...]
    first_check: float
    prefix: str
    unknowns: int
    ranges: Mapping[str, tuple[float, float]]  # of the unknowns: below, inside, above the standards
    last_dilution: float = 1.0  # the last sample of the day comes diluted
    dilute_above: float = 1.0  # a sample above the standards is measured a second time, diluted
    regions_today: tuple[str, ...] = ()  # fixed for the season's last day


def falling_logistic(x: float, p: Parameters) -> float:
    steepened: float = (x / p["midpoint"]) ** p["slope"]
    return p["infinite"] + (p["zero"] - p["infinite"]) / (1.0 + steepened)


def quenching(x: float, p: Parameters) -> float:
    return p["offset"] + p["unquenched"] / (1.0 + p["quenching_constant"] * x)


def saturation(x: float, p: Parameters) -> float:
    return p["offset"] + p["capacity"] * x / (p["half"] + x)


def squared_saturation(x: float, p: Parameters) -> float:
    return p["offset"] + p["capacity"] * x * x / (p["half"] ** 2 + x * x)


PLANS: Mapping[str, Plan] = {
    "PP-2": Plan(
        ordinal=1,
        response=falling_logistic,
        parameters={
            "zero": Parameter(2.0, -0.0008, 0.008),
            "infinite": Parameter(0.08, 0.0, 0.010),
            "midpoint": Parameter(0.6, 0.0004, 0.015),
            "slope": Parameter(1.1, 0.0, 0.004),
        },
        steps=(Step(date(2026, 4, 8), "lamp replaced", {"zero": 1.06, "infinite": 1.06}, renewed=True),),
        noise="relative",
        noise_sd=0.03,
        deviation=abs,
        standards=(0.25, 0.4, 0.7, 1.2, 2.0, 3.6, 6.4),
        anchors=(0.05, 20.0),
        replicates=3,
        blanks=3,
        blank_content=0.0,
        zeros=3,
        checks=(("Q1", 0.8), ("Q2", 3.0)),
        first_check=1.5,
        prefix="L",
        unknowns=18,
        ranges={"below": (0.03, 0.15), "inside": (0.3, 5.5), "above": (8.0, 18.0)},
        last_dilution=10.0,
        regions_today=("inside", "above", "inside", "inside", "below", "inside", "inside", "above"),
    ),
    "OP-1": Plan(
        ordinal=2,
        response=quenching,
        parameters={
            "offset": Parameter(0.0, 0.0, 0.0),
            "unquenched": Parameter(100.0, -0.0012, 0.004),
            "quenching_constant": Parameter(0.35, 0.0002, 0.004),
        },
        steps=(
            Step(
                date(2026, 4, 21),
                "sensor cap replaced",
                {"unquenched": 1.04, "quenching_constant": 0.95},
                renewed=True,
            ),
        ),
        noise="variance proportional to the response",
        noise_sd=0.05,
        deviation=lambda mean: mean**0.5,
        standards=(0.0, 0.5, 1.0, 2.0, 4.0, 6.0, 9.0, 12.0),
        anchors=(),
        replicates=2,
        blanks=2,
        blank_content=0.0,
        zeros=0,
        checks=(("Q1", 3.0), ("Q2", 8.0)),
        first_check=5.0,
        prefix="O",
        unknowns=6,
        ranges={"below": (0.1, 0.4), "inside": (0.6, 11.0), "above": (13.0, 16.0)},
    ),
    "EE-3": Plan(
        ordinal=3,
        response=saturation,
        parameters={
            "offset": Parameter(0.0, 0.0, 0.0),
            "capacity": Parameter(850.0, -0.0020, 0.008),
            "half": Parameter(14.0, 0.0004, 0.008),
        },
        steps=(
            Step(
                date(2026, 3, 26), "enzyme membrane replaced", {"capacity": 1.06, "half": 1.08}, renewed=True
            ),
        ),
        noise="relative",
        noise_sd=0.02,
        deviation=abs,
        standards=(0.5, 1.0, 2.0, 4.0, 7.0, 11.0, 16.0, 22.0, 30.0),
        anchors=(),
        replicates=2,
        blanks=2,
        blank_content=0.02,  # the laboratory's pure water is not quite free of nitrate
        zeros=0,
        checks=(("Prüf-1", 5.0), ("Prüf-2", 15.0)),
        first_check=10.0,
        prefix="N",
        unknowns=8,
        ranges={"below": (0.15, 0.4), "inside": (0.6, 26.0), "above": (36.0, 90.0)},
        last_dilution=5.0,
        dilute_above=10.0,
    ),
    "GB-4": Plan(
        ordinal=4,
        response=squared_saturation,
        parameters={
            "offset": Parameter(0.05, 0.0, 0.020),
            "capacity": Parameter(1.4, -0.0004, 0.006),
            "half": Parameter(60.0, 0.0003, 0.008),
        },
        steps=(
            Step(
                date(2026, 5, 4),
                "standard lot CB-2604 with its own growth medium: faster growth, carbon exact",
                {"capacity": 1.04},
                renewed=False,
            ),
        ),
        noise="uniform",
        noise_sd=0.01,
        deviation=lambda mean: 1.0,
        standards=(15.0, 22.0, 33.0, 50.0, 75.0, 110.0, 160.0, 240.0),
        anchors=(),
        replicates=3,
        blanks=3,
        blank_content=0.0,
        zeros=0,
        checks=(("Q1", 40.0), ("Q2", 120.0)),
        first_check=60.0,
        prefix="C",
        unknowns=8,
        ranges={"below": (2.0, 9.0), "inside": (18.0, 200.0), "above": (300.0, 600.0)},
    ),
}


def seed_of(plan: Plan, day: date) -> tuple[int, int, int]:
    """Every file has a seed of its own, so a change to one day leaves all others alone."""
    return SEED, plan.ordinal, (day - FIRST_DAY).days


def afternoon_seed(plan: Plan, day: date) -> tuple[int, int, int, int]:
    return *seed_of(plan, day), 15


def random_state(seed: tuple[int, ...]) -> RandomState:
    """RandomState, because numpy promises that its streams never change (NEP 19); Generator's may."""
    return RandomState(np.random.MT19937(np.random.SeedSequence(seed)))


def significant(value: float, digits: int) -> float:
    """Rounded before use, so that the truth kept beside the files is exactly the truth used."""
    return float(f"{value:.{digits}g}")


def true_parameters(plan: Plan, day: date, random: RandomState) -> dict[str, float]:
    """Start value × ageing × sudden steps × scatter from day to day."""
    past = [step for step in plan.steps if step.day <= day]
    age = (day - max([FIRST_DAY, *(step.day for step in past if step.renewed)])).days
    values = {}
    for name, parameter in plan.parameters.items():
        step = prod(one.factors.get(name, 1.0) for one in past)
        scatter = exp(parameter.daily_scatter * random.standard_normal())
        values[name] = significant(parameter.start * (1.0 + parameter.daily_change * age) * step * scatter, 6)
    return values


def calibration_cups(plan: Plan, new_lot: bool) -> list[Cup]:
    """Standards, anchors, zero wells, blanks and checks; with a new lot also a first check."""
    anchors = [("anchor", level) for level in plan.anchors]
    levels = sorted([*anchors, *(("standard", level) for level in plan.standards)], key=lambda one: one[1])
    cups = [
        Cup(f"S{number}", role, level, level)
        for number, (role, level) in enumerate(levels, start=1)
        for _ in range(plan.replicates)
    ]
    cups += [Cup("zero", "zero", 0.0, 0.0)] * plan.zeros
    cups += [Cup("blank", "blank", None, plan.blank_content)] * plan.blanks
    cups += [Cup(label, "check", level, level) for label, level in plan.checks]
    if new_lot:
        cups.append(Cup("F1", "first-check", plan.first_check, plan.first_check))
    return cups


def draw_region(random: RandomState) -> str:
    draw = random.random_sample()
    return "below" if draw < 0.06 else "above" if draw > 0.93 else "inside"


def draw_concentration(bounds: tuple[float, float], random: RandomState) -> float:
    """Log-uniform between the bounds."""
    lower, upper = bounds
    return significant(exp(log(lower) + (log(upper) - log(lower)) * random.random_sample()), 4)


def unknown_cups(plan: Plan, day: date, last_day: date, random: RandomState) -> list[Cup]:
    """Every sample twice; the last one diluted; one above the standards a second time, diluted."""
    fixed = plan.regions_today if day == last_day else ()
    cups: list[Cup] = []
    for index in range(plan.unknowns):
        drawn = draw_region(random)
        region = fixed[index] if index < len(fixed) else drawn
        dilution = plan.last_dilution if index == plan.unknowns - 1 else 1.0
        content = draw_concentration(plan.ranges[region], random)
        label = f"{plan.prefix}-{day:%m%d}-{index + 1:02d}"
        cups += [Cup(label, "unknown", None, content, dilution)] * 2
        if region == "above" and plan.dilute_above != 1.0 and dilution == 1.0:
            cups += [Cup(label, "unknown", None, content / plan.dilute_above, plan.dilute_above)] * 2
    return cups


def afternoon_cups(plan: Plan, day: date, random: RandomState) -> tuple[Cup, ...]:
    """Six samples twice: one of them diluted, one above the standards."""
    cups: list[Cup] = []
    for number in range(1, 7):
        region, dilution = "above" if number == 4 else "inside", 10.0 if number == 6 else 1.0
        content = draw_concentration(plan.ranges[region], random)
        cups += [Cup(f"{plan.prefix}-{day:%m%d}-P{number}", "unknown", None, content, dilution)] * 2
    return tuple(cups)


def measure(plan: Plan, content: float, parameters: Parameters, deviate: float) -> float:
    """One response: the law at the true content, and noise exactly as the method's noise model says."""
    mean = plan.response(content, parameters)
    return mean + plan.noise_sd * plan.deviation(mean) * deviate
