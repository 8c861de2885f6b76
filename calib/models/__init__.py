"""Response models: one file each, and the one tuple of all."""

from __future__ import annotations

from calib.errors import ModelError
from calib.models.custom import CustomModel, custom_model
from calib.models.first_order import FirstOrder
from calib.models.five_parameter_logistic import FiveParameterLogistic
from calib.models.four_parameter_logistic import FourParameterLogistic
from calib.models.line import Line
from calib.models.power_law import PowerLaw
from calib.models.proportional import Proportional
from calib.models.quadratic import Quadratic
from calib.models.quenching import Quenching
from calib.models.response_model import Asymptote, Parameter, ResponseModel
from calib.models.saturation import Saturation
from calib.models.squared_saturation import SquaredSaturation

RESPONSE_MODELS: tuple[ResponseModel, ...] = (
    Line(),
    Proportional(),
    Quadratic(),
    PowerLaw(),
    Saturation(),
    SquaredSaturation(),
    FirstOrder(),
    Quenching(),
    FourParameterLogistic(),
    FiveParameterLogistic(),
)


def response_model(key: str | ResponseModel) -> ResponseModel:
    """Model of that key; a model object passes through.

    Raises
    ------
    ModelError
        When no model has that key.
    """
    if isinstance(key, ResponseModel):
        return key
    for model in RESPONSE_MODELS:
        if model.name == key:
            return model
    known = ", ".join(m.name for m in RESPONSE_MODELS)
    raise ModelError(f"unknown response model '{key}'; known are: {known}")


__all__ = [
    "RESPONSE_MODELS",
    "Asymptote",
    "CustomModel",
    "Parameter",
    "ResponseModel",
    "custom_model",
    "response_model",
]
