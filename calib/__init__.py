"""calib: calibration curves of analytical instruments.

The names below are loaded on first use, so that ``import calib`` stays cheap.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from calib.bench.laboratory import Laboratory, open_store
    from calib.curves.bootstrap import Bootstrap, bootstrap
    from calib.curves.curve import BackCalculation, Curve
    from calib.curves.diagnostics import Finding
    from calib.curves.fit import fit
    from calib.curves.noise import NoiseModel, assumed_noise
    from calib.curves.pooling import pool_noise
    from calib.curves.stack import CurveStack, fit_stack
    from calib.errors import CalibError
    from calib.models import RESPONSE_MODELS, custom_model
    from calib.quantification.budget import Component
    from calib.quantification.curve_limits import CurveLimits, curve_limits
    from calib.quantification.detection import blank_limits, line_limits, method_detection_limit
    from calib.quantification.influence import Influence, influence
    from calib.quantification.inverse import Quantity
    from calib.quantification.range import precision_profile, working_range

__version__ = "0.1.0"

_HOME = {
    "BackCalculation": "calib.curves.curve",
    "Bootstrap": "calib.curves.bootstrap",
    "CalibError": "calib.errors",
    "Component": "calib.quantification.budget",
    "Curve": "calib.curves.curve",
    "CurveLimits": "calib.quantification.curve_limits",
    "CurveStack": "calib.curves.stack",
    "Finding": "calib.curves.diagnostics",
    "Influence": "calib.quantification.influence",
    "NoiseModel": "calib.curves.noise",
    "Quantity": "calib.quantification.inverse",
    "RESPONSE_MODELS": "calib.models",
    "assumed_noise": "calib.curves.noise",
    "blank_limits": "calib.quantification.detection",
    "bootstrap": "calib.curves.bootstrap",
    "custom_model": "calib.models",
    "curve_limits": "calib.quantification.curve_limits",
    "fit": "calib.curves.fit",
    "fit_stack": "calib.curves.stack",
    "influence": "calib.quantification.influence",
    "line_limits": "calib.quantification.detection",
    "method_detection_limit": "calib.quantification.detection",
    "Laboratory": "calib.bench.laboratory",
    "open_store": "calib.bench.laboratory",
    "pool_noise": "calib.curves.pooling",
    "precision_profile": "calib.quantification.range",
    "working_range": "calib.quantification.range",
}

__all__ = [
    "RESPONSE_MODELS",
    "BackCalculation",
    "Bootstrap",
    "CalibError",
    "Component",
    "Curve",
    "CurveLimits",
    "CurveStack",
    "Finding",
    "Influence",
    "Laboratory",
    "NoiseModel",
    "Quantity",
    "assumed_noise",
    "blank_limits",
    "bootstrap",
    "curve_limits",
    "custom_model",
    "fit",
    "fit_stack",
    "influence",
    "line_limits",
    "method_detection_limit",
    "open_store",
    "pool_noise",
    "precision_profile",
    "working_range",
]


def __getattr__(name: str) -> object:
    if name not in _HOME:
        raise AttributeError(f"module 'calib' has no attribute {name!r}")
    return getattr(import_module(_HOME[name]), name)


def __dir__() -> list[str]:
    return sorted([*__all__, "__version__"])
