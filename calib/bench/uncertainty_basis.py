"""What is known beside reading and curve when a run is quantified."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from calib.curves.curve import Curve
from calib.quantification.between_run import BETWEEN_RUNS, CurveScatter
from calib.quantification.budget import Component, FurtherUncertainty
from calib.quantification.preparation import UncertainLevels

DILUTION = "dilution"
LOT = "standard lot with its preparation"


@dataclass(frozen=True, slots=True, eq=False)
class UncertaintyBasis:
    """Components of a combined uncertainty, and in words what could not be included.

    Attributes
    ----------
    relative : tuple of Component
        Between runs and standard lot, for every sample.
    dilution : Component or None
        For diluted samples.
    levels : UncertainLevels or None
    scatter : CurveScatter or None
        For samples read on the curve of another day.
    left_out : tuple of str
    runs : tuple of int
        Past runs that were used.
    """

    relative: tuple[Component, ...] = ()
    dilution: Component | None = None
    levels: UncertainLevels | None = None
    scatter: CurveScatter | None = None
    left_out: tuple[str, ...] = ()
    runs: tuple[int, ...] = ()

    @property
    def combined(self) -> bool:
        """Whether there is a combined uncertainty: without the between-run component there is none."""
        return any(c.name == BETWEEN_RUNS for c in self.relative)

    def components(self, curve: Curve, diluted: bool) -> tuple[FurtherUncertainty, ...]:
        """Components of a sample; none where the uncertainty is that of the curve only."""
        if not self.combined:
            return ()
        found: list[FurtherUncertainty] = list(self.relative)
        if self.levels is not None:
            found.append(self.levels.on(curve))
        if self.scatter is not None:
            found.append(self.scatter)
        if diluted and self.dilution is not None:
            found.append(self.dilution)
        return tuple(found)

    def degrees_of_freedom(self, name: str, curve: float) -> float:
        """Degrees of freedom behind a component of a budget; ``curve`` is what the curve has."""
        known = {c.name: c.degrees_of_freedom for c in (*self.relative, self.dilution, self.scatter) if c}
        if self.levels is not None:
            known.setdefault("preparation of the levels", np.inf)
        return known.get(name, curve)


CURVE_ONLY = UncertaintyBasis()


def basis_parts(basis: UncertaintyBasis) -> list[dict[str, Any]]:
    """Components as plain values, complete enough to be read back to the last digit."""
    parts: list[dict[str, Any]] = [_relative("relative", c) for c in basis.relative]
    if basis.dilution is not None:
        parts.append(_relative("dilution", basis.dilution))
    if basis.levels is not None:
        levels = basis.levels
        parts.append(
            {"kind": "levels", "levels": levels.levels.tolist(), "covariance": levels.covariance.tolist()}
        )
    if basis.scatter is not None:
        scatter = basis.scatter
        parts.append(
            {
                "kind": "curve scatter",
                "parameters": scatter.parameters.tolist(),
                "covariance": scatter.covariance.tolist(),
            }
        )
    return parts


def _relative(kind: str, c: Component) -> dict[str, Any]:
    known = np.isinf(c.degrees_of_freedom)
    return {
        "kind": kind,
        "name": c.name,
        "relative_u": c.relative_u,
        "degrees_of_freedom": None if known else c.degrees_of_freedom,
        "spread": c.spread,
    }


def basis_from(
    parts: Sequence[Mapping[str, Any]], left_out: Sequence[str], runs: Sequence[int]
) -> UncertaintyBasis:
    """The basis `basis_parts` wrote down."""
    by_kind: dict[str, list[Mapping[str, Any]]] = {}
    for part in parts:
        by_kind.setdefault(part["kind"], []).append(part)
    dilution = [_component(p) for p in by_kind.get("dilution", [])]
    levels = [
        UncertainLevels(np.array(p["levels"], dtype=float), np.array(p["covariance"], dtype=float))
        for p in by_kind.get("levels", [])
    ]
    scatter = [
        CurveScatter(np.array(p["parameters"], dtype=float), np.array(p["covariance"], dtype=float))
        for p in by_kind.get("curve scatter", [])
    ]
    return UncertaintyBasis(
        relative=tuple(_component(p) for p in by_kind.get("relative", [])),
        dilution=dilution[0] if dilution else None,
        levels=levels[0] if levels else None,
        scatter=scatter[0] if scatter else None,
        left_out=tuple(left_out),
        runs=tuple(runs),
    )


def _component(part: Mapping[str, Any]) -> Component:
    freedom = part["degrees_of_freedom"]
    return Component(part["name"], part["relative_u"], np.inf if freedom is None else freedom, part["spread"])
