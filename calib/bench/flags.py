"""Flags of a reported quantity: a short code each, and its words."""

from __future__ import annotations

FLAGS: dict[str, str] = {
    "above-range": "above the highest standard: dilute and measure again",
    "below-range": "below the lowest standard",
    "lopsided": "interval is lopsided: read its limits, there is no ±",
    "one-sided": "interval is open on one side",
    "no-value": "no concentration can be given",
    "off-curve": "response lies outside the curve",
    "second-region": "a second range of concentrations agrees with this response",
    "replicate-spread": "replicates differ more than the curve's noise allows: no interval is given",
    "absent-reading": "a reading is absent (see the file)",
    "saturated": "detector at its ceiling",
    "below-reporting-limit": "below the reporting limit: the estimate is kept and not reported",
    "too-few-replicates": "fewer readings than the method asks for: measure again",
    "replicate-cv": "replicates differ more than the method allows: measure again",
    "not-bracketed": "not between two passing check standards: measure again",
    "high-bias-kept": "a check around it read too high; kept, as nothing was found",
    "carry-over-risk": "measured right after a sample above the range, with carry-over: measure again",
    "internal-standard": "internal standard outside its limits: dilute or measure again",
    "curve-rejected": "the curve was rejected: no result",
    "curve-superseded": "the curve was superseded and its successor rejected: no result",
}


def in_words(flag: str) -> str:
    """Words of a flag."""
    return FLAGS.get(flag, flag)
