"""The proof of a method as plain JSON values."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from calib.bench.proof_records import Proof, ProvenCell, Scenario, Share

PROOF = "calib-proof-1"


def proof_json(proof: Proof) -> dict[str, Any]:
    """What `calib prove --json` prints: shares are fractions, each with its 95 % interval."""
    return {
        "schema": PROOF,
        "method": proof.method,
        "method_version": proof.version,
        "instrument": proof.instrument,
        "seed": proof.seed,
        "simulated": {
            "model": proof.model,
            "curves_of_runs": list(proof.curves),
            "noise": proof.noise,
            "noise_source": proof.noise_source,
            "residual_sd": proof.residual_sd,
            "noise_of_the_method": proof.method_noise,
            "levels": [{"concentration": x, "readings": n} for x, n in proof.levels],
            "calibrated_range": {
                "lowest": proof.calibrated[0],
                "highest": proof.calibrated[1],
                "unit": proof.concentration_unit,
            },
        },
        "confidence": proof.confidence,
        "coverage": [_cell(cell) for cell in proof.cells],
        "read_in_faulty_runs": {
            "concentrations": list(proof.asked_of_faulty),
            "replicates": proof.usual_replicates,
        },
        "criteria": [{"id": c.key, "what": c.what, "warns": c.warns} for c in proof.criteria],
        "scenarios": [_scenario(s) for s in proof.scenarios],
        "not_covered": ["errors of the levels", "another response model", "scatter that is not normal"],
    }


def _cell(cell: ProvenCell) -> dict[str, Any]:
    return {
        "concentration": cell.concentration,
        "replicates": cell.replicates,
        "covered": _share(cell.covered),
        "interval_too_high": _share(cell.missed_below),
        "interval_too_low": _share(cell.missed_above),
        "median_bias": cell.bias,
        "median_relative_length": cell.relative_length,
        "open": _share(cell.open),
        "no_value": _share(cell.missing),
    }


def _scenario(scenario: Scenario) -> dict[str, Any]:
    return {
        "id": scenario.key,
        "what": scenario.words,
        "rejected": _share(scenario.rejected),
        "accepted_with_exclusions": _share(scenario.with_exclusions),
        "covered_in_accepted_runs": _share(scenario.covered),
        "not_kept": {key: _share(share) for key, share in scenario.fired.items()},
    }


def _share(share: Share) -> dict[str, Any]:
    low, high = share.interval or (None, None)
    return {"share": share.value, "lower": low, "upper": high, "count": share.count, "of": share.of}
