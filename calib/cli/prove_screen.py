"""The proof of a method on the screen."""

from __future__ import annotations

from calib.bench.proof_records import Proof
from calib.cli.screen import print_table, say
from calib.report.proof_rows import (
    NOT_COVERED,
    coverage_headings,
    coverage_rows,
    fault_lines,
    heading,
    reading_lines,
    scenario_headings,
    scenario_rows,
)


def show_proof(proof: Proof) -> None:
    """Coverage first, then what the rules notice, then what all of it does not say."""
    first, *rest = heading(proof)
    say(first, "bold")
    for line in rest:
        say(f"  {line}")
    if proof.clean.covered.of:
        print_table(coverage_headings(proof), coverage_rows(proof))
    else:
        say("  no clean run was accepted, so no interval was reported: look at the rules below")
    print_table(scenario_headings(proof), scenario_rows(proof))
    for line in (*fault_lines(proof), *reading_lines(proof)):
        say(f"  {line}")
    for line in NOT_COVERED:
        say(line)
