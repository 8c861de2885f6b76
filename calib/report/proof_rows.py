"""The proof of a method in words and table rows, shared by screen and picture."""

from __future__ import annotations

from collections.abc import Iterable
from typing import TYPE_CHECKING

from calib.report.wording import MISSING, number, percent, with_unit

if TYPE_CHECKING:
    from calib.bench.proof_records import Proof, ProvenCell, Share

SHORT = {
    "clean": "clean",
    "levels-exchanged": "levels exchanged",
    "mis-pipetted": "one mis-pipetted",
    "noise-doubled": "noise doubled",
    "wrong-lot": "wrong lot",
    "top-saturated": "top saturated",
}
"""Headings of the scenarios."""

NOT_COVERED = (
    "What this does not cover: the levels are taken as exact (errors of preparation make the true coverage lower),",
    "the response model as true, the scatter as normal (no heavy tails, no plate positions, no drift within a run),",
    "and samples as free of matrix effects. It is evidence beside the validation of the method, not instead of it:",
    "the validated method, local rules and accredited practice decide.",
)


def heading(proof: Proof) -> tuple[str, ...]:
    """What was simulated."""
    levels = sorted({n for _, n in proof.levels})
    replicates = str(levels[0]) if len(levels) == 1 else f"{levels[0]} to {levels[-1]}"
    low, high = proof.calibrated
    clean = proof.clean.rejected.of
    return (
        f"{proof.method} v{proof.version} on {proof.instrument}: {clean} clean runs and "
        f"{proof.scenarios[-1].rejected.of} with each fault, simulated as the method is; seed {proof.seed}",
        f"a run: {len(proof.levels)} levels × {replicates} from {number(low)} to "
        f"{with_unit(number(high), proof.concentration_unit)}, read as in run {proof.curves[-1]}; "
        f"curves: {proof.model} of runs {_runs(proof.curves)}",
        f"noise taken as true: {proof.noise}, residual SD {number(proof.residual_sd)} ({proof.noise_source}); "
        f"the method assumes: {proof.method_noise}",
    )


def coverage_headings(proof: Proof) -> tuple[str, ...]:
    """Headings of `coverage_rows`."""
    claimed = percent(proof.confidence, 0)
    unit = proof.concentration_unit
    return (
        f">Truth [{unit}]",
        ">n",
        f">Covered ({claimed} claimed)",
        ">95 % interval",
        ">Too high",
        ">Too low",
        ">Bias",
        ">Length",
        ">Open",
        ">No value",
    )


def coverage_rows(proof: Proof) -> list[tuple[str, ...]]:
    """One row for each concentration and number of replicates."""
    return [_coverage_row(cell) for cell in proof.cells]


def _coverage_row(cell: ProvenCell) -> tuple[str, ...]:
    return (
        number(cell.concentration, 3),
        str(cell.replicates),
        percent(cell.covered.value),
        between(cell.covered),
        _seen(cell.missed_below),
        _seen(cell.missed_above),
        MISSING if cell.bias is None else f"{100 * cell.bias:+.1f} %",
        "open" if cell.relative_length is None and cell.covered.of else percent(cell.relative_length, 0),
        _seen(cell.open),
        _seen(cell.missing),
    )


def scenario_headings(proof: Proof) -> tuple[str, ...]:
    """Headings of `scenario_rows`."""
    return ("In how many runs", *(f">{SHORT[s.key]}" for s in proof.scenarios))


def scenario_rows(proof: Proof) -> list[tuple[str, ...]]:
    """What the rules of the method do in each scenario: first the verdict, then each criterion."""
    rows = [("run rejected", *(percent(s.rejected.value) for s in proof.scenarios))]
    if any(s.with_exclusions.count for s in proof.scenarios):
        shares = (percent(s.with_exclusions.value) for s in proof.scenarios)
        rows.append(("accepted with exclusions", *shares))
    for criterion in proof.criteria:
        shares = (_seen(s.fired.get(criterion.key)) for s in proof.scenarios)
        rows.append((f"  {criterion.key}{' (warns only)' if criterion.warns else ''} not kept", *shares))
    rows.append(
        ("intervals of accepted runs that cover", *(percent(s.covered.value) for s in proof.scenarios))
    )
    return rows


def fault_lines(proof: Proof) -> list[str]:
    """What each fault is, in words."""
    return [f"{SHORT[s.key]}: {s.words}" for s in proof.scenarios[1:]]


def reading_lines(proof: Proof) -> tuple[str, ...]:
    """How to read the figures."""
    asked = ", ".join(number(x, 3) for x in proof.asked_of_faulty)
    times = "once" if proof.usual_replicates == 1 else f"{proof.usual_replicates} times each"
    return (
        "Intervals are those of accepted runs, curve only; Too high and Too low: the whole interval lies there; "
        "Length: median width as a share of the truth;",
        "Open: an end is open; No value: outside the calibrated range, or no estimate (half of them at its very ends).",
        f"Runs with a fault are read at {with_unit(asked, proof.concentration_unit)}, {times}.",
    )


def between(share: Share) -> str:
    """The simulation uncertainty of a share, for example '92.1–96.8 %'."""
    ends = share.interval
    return MISSING if ends is None else f"{100 * ends[0]:.1f}–{100 * ends[1]:.1f} %"


def _seen(share: Share | None) -> str:
    """A share, with nothing for none at all so that the rest stands out."""
    if share is None or share.value is None:
        return MISSING
    return "0" if share.count == 0 else percent(share.value)


def _runs(numbers: Iterable[int]) -> str:
    listed = list(numbers)
    return ", ".join(map(str, listed)) if len(listed) < 4 else f"{listed[0]} … {listed[-1]} ({len(listed)})"
