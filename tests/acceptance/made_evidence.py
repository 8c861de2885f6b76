"""Evidence made for tests: standards from (level, relative error) pairs, all else harmless."""

import math

from calib.acceptance import Evidence, JudgedStandard, Limit


def standard(level, relative_error=0.0, **changes):
    facts = {
        "label": f"S{level:g}",
        "role": "standard",
        "level": level,
        "response": 1.0,
        "back_calculated": level * (1 + relative_error),
        "relative_error": relative_error,
        "excluded": False,
        "saturated": False,
    }
    return JudgedStandard(**{**facts, **changes})


def off_curve(level, **changes):
    return standard(level, math.nan, **changes)


def evidence(standards, **changes):
    facts = {
        "standards": tuple(standards),
        "checks": (),
        "blanks": (),
        "converged": True,
        "findings": (),
        "residual_sd": 1.0,
        "free_parameters": 2,
        "r_squared": 0.999,
        "concentration_unit": "ug/L",
    }
    return Evidence(**{**facts, **changes})


def limits(**values):
    return {key: Limit(value, "method made-up version 1", "method") for key, value in values.items()}
