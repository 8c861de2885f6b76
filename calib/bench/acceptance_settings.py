"""The [acceptance] table of a method: a preset, and what the method sets, leaves out or only warns of."""

from __future__ import annotations

import math
import tomllib
from collections.abc import Mapping
from dataclasses import replace
from importlib import resources
from typing import Any

from calib.acceptance import CRITERIA, Limit, Quantity, criteria_from, ratio_of, read_preset
from calib.acceptance.limits import CHECKED
from calib.bench.amounts import amount_in
from calib.errors import MethodError

NO_LIMITS = ("preset", "warn_only", "left_out")
OWN_LIMIT = ("value", "source", "checked")
BEFORE_PRESETS_WERE_KEPT = "first"


def acceptance_limits(
    table: object, own_source: str, unit: str, model: str, preset: str | None
) -> dict[str, Limit]:
    """Limits of a method: those of its preset for the model, with its own over them.

    Parameters
    ----------
    table : object
        The [acceptance] table as read from TOML.
    own_source : str
        Source of limits the method gives without one.
    unit : str
        Concentration unit of the method; limits that are concentrations are turned into it.
    model : str
        Key of the response model.
    preset : str or None
        Text of the preset as it was when the method was added; None for that of this calib.

    Raises
    ------
    MethodError
        For an unknown preset or key, an impossible value, or limits that contradict each other.
    """
    if not isinstance(table, Mapping) or "preset" not in table:
        raise MethodError(
            f'acceptance needs preset = "…"; known are {", ".join(preset_names())}', "acceptance"
        )
    kept = preset_text(str(table["preset"])) if preset is None else preset
    own = {
        key: _own_limit(key, value, own_source, unit) for key, value in table.items() if key not in NO_LIMITS
    }
    start = _narrower_ends_left_out(read_preset(kept, model), own)
    for key in _keys(table, "left_out"):
        if key not in start:
            raise MethodError(
                f"acceptance.left_out: the preset has no limit {key!r}; it has {', '.join(start)}",
                "acceptance.left_out",
            )
        del start[key]
    limits = start | own
    for key in _keys(table, "warn_only"):
        if key not in limits:
            raise MethodError(
                f"acceptance.warn_only: the method has no limit {key!r}; it has {', '.join(limits)}",
                "acceptance.warn_only",
            )
        limits[key] = replace(limits[key], warns=True)
    criteria_from(limits)  # refuses unknown keys and contradictions
    return limits


def preset_names() -> tuple[str, ...]:
    """Names of the acceptance presets that come with calib."""
    folder = resources.files("calib.acceptance") / "presets"
    return tuple(sorted(f.name.removesuffix(".toml") for f in folder.iterdir() if f.name.endswith(".toml")))


def preset_text(name: str) -> str:
    """Text of a preset of this calib.

    Raises
    ------
    MethodError
        When there is no such preset.
    """
    if name not in preset_names():
        raise MethodError(
            f"acceptance.preset = {name!r} is unknown; known are {', '.join(preset_names())}",
            "acceptance.preset",
        )
    return (resources.files("calib.acceptance") / "presets" / f"{name}.toml").read_text(encoding="utf-8")


def preset_limits(name: str, model: str | None = None) -> dict[str, Limit]:
    """Limits of a preset of this calib, for a response model."""
    return read_preset(preset_text(name), model)


def preset_of(text: str) -> str:
    """Text of the preset that the TOML text of a method names, to be kept beside the method."""
    return preset_text(str(tomllib.loads(text)["acceptance"]["preset"]))


def preset_of_early_method(text: str) -> str:
    """Text of the preset of a method that was added before presets were kept beside the method."""
    name = str(tomllib.loads(text)["acceptance"]["preset"])
    folder = resources.files("calib.acceptance") / "presets" / BEFORE_PRESETS_WERE_KEPT
    return (folder / f"{name}.toml").read_text(encoding="utf-8")


def limits_without_unit(text: str) -> tuple[str, ...]:
    """Keys of limits that are concentrations and are written as a bare number."""
    table = tomllib.loads(text)["acceptance"]
    return tuple(
        key
        for key, value in table.items()
        if key in CRITERIA
        and CRITERIA[key].quantity is Quantity.CONCENTRATION
        and not isinstance(value.get("value") if isinstance(value, Mapping) else value, str)
    )


def _keys(table: Mapping[str, Any], name: str) -> list[str]:
    keys = table.get(name, [])
    if not isinstance(keys, list) or not all(isinstance(key, str) for key in keys):
        raise MethodError(
            f'acceptance.{name} = {keys!r} must be a list of limits, such as ["lack_of_fit"]',
            f"acceptance.{name}",
        )
    return keys


def _own_limit(key: str, value: object, own_source: str, unit: str) -> Limit:
    place = f"acceptance.{key}"
    if not isinstance(value, Mapping):
        return Limit(_figure(key, value, unit), own_source, "method")
    if set(value) - set(OWN_LIMIT) or "value" not in value:
        raise MethodError(f"{place}: a limit is a value, or a table of {', '.join(OWN_LIMIT)}", place)
    source, checked = value.get("source", own_source), value.get("checked", "method")
    if checked not in CHECKED:
        raise MethodError(
            f"{place}.checked = {checked!r} is unknown; allowed are {', '.join(CHECKED)}", place
        )
    return Limit(_figure(key, value["value"], unit), str(source), str(checked))


def _figure(key: str, value: object, unit: str) -> float:
    """Value of a limit: a number, or text such as "15 %", "2/3" or "0.1 mg/L"."""
    place = f"acceptance.{key}"
    quantity = CRITERIA[key].quantity if key in CRITERIA else None
    if isinstance(value, str) and quantity is Quantity.CONCENTRATION:
        return amount_in(value, unit, place)
    if isinstance(value, str) and quantity in (Quantity.SHARE, Quantity.FRACTION):
        ratio = ratio_of(value)
        if ratio is not None:
            return ratio
    if isinstance(value, bool) or not isinstance(value, int | float) or not math.isfinite(value):
        raise MethodError(f"{place} = {value!r} must be a finite number", place)
    return float(value)


def _narrower_ends_left_out(preset: dict[str, Limit], own: Mapping[str, Limit]) -> dict[str, Limit]:
    """Preset limits without end-level ones that the method's own wider middle limit overtakes."""
    middle = own.get("relative_error")
    if middle is None:
        return preset
    ends = ("relative_error_lowest", "relative_error_highest")
    return {k: v for k, v in preset.items() if k not in ends or v.value >= middle.value}
