"""Compute published check values again on this installation, and keep the dated result."""

from __future__ import annotations

import json
import math
import platform
from collections.abc import Mapping
from dataclasses import dataclass
from datetime import datetime
from importlib import resources
from typing import Any

from sqlalchemy import select

from calib import store as tables
from calib.bench.keeping import versions
from calib.bench.show_run import local
from calib.curves.curve import Curve
from calib.curves.fit import fit

# A printed half unit of the last place is not exact in binary.
SLACK = 1e-9


@dataclass(frozen=True, slots=True)
class CheckedValue:
    """One published figure beside what this installation computes."""

    case: str
    source: str
    what: str
    published: float
    tolerance: float
    found: float | None

    @property
    def agrees(self) -> bool:
        """Whether the figure comes out within its tolerance."""
        if self.found is None:
            return False
        return abs(self.found - self.published) <= self.tolerance * (1 + SLACK) + 1e-12 * abs(self.published)


@dataclass(frozen=True, slots=True)
class VerificationRecord:
    """One verification: what was computed, with which versions, on what machine, when and by whom."""

    number: int | None
    at: datetime
    by: str
    versions: Mapping[str, str]
    platform: str
    values: tuple[CheckedValue, ...]

    @property
    def passed(self) -> bool:
        """Whether every figure came out."""
        return all(value.agrees for value in self.values)


def check_values() -> tuple[CheckedValue, ...]:
    """Fit every published case that ships with calib and read its figures off."""
    return tuple(value for case in published_cases() for value in _computed(case))


def published_cases() -> list[dict[str, Any]]:
    """The published cases, each with its source."""
    text = (resources.files("calib.bench") / "check_values.json").read_text(encoding="utf-8")
    cases: list[dict[str, Any]] = json.loads(text)
    return cases


def verify_installation(store: tables.Store, *, by: str) -> VerificationRecord:
    """Compute the check values and keep the result, passed or not, in the store."""
    values, now = check_values(), store.now()
    offset = now.utcoffset()
    row = tables.Verification(
        passed=all(v.agrees for v in values),
        values=[
            {
                "case": v.case,
                "source": v.source,
                "what": v.what,
                "published": v.published,
                "tolerance": v.tolerance,
                "found": v.found,
            }
            for v in values
        ],
        versions=versions() | {"python": platform.python_version()},
        platform=f"{platform.system()} {platform.release()} {platform.machine()}",
        by=by,
        at=now,
        offset_minutes=round(offset.total_seconds() / 60) if offset else 0,
    )
    with store.change(action="verify installation", by=by) as session:
        session.add(row)
    return _record(row)


def list_verifications(store: tables.Store) -> tuple[VerificationRecord, ...]:
    """Every verification on record, oldest first."""
    with store.reading() as session:
        rows = session.scalars(select(tables.Verification).order_by(tables.Verification.id)).all()
    return tuple(_record(row) for row in rows)


def _record(row: tables.Verification) -> VerificationRecord:
    return VerificationRecord(
        number=row.id,
        at=local(row.at, row.offset_minutes),
        by=row.by,
        versions=dict(row.versions),
        platform=row.platform,
        values=tuple(CheckedValue(**value) for value in row.values),
    )


def _computed(case: Mapping[str, Any]) -> list[CheckedValue]:
    curve = fit(
        case["x"],
        case["y"],
        model=case["model"],
        fixed=case.get("fixed"),
        u=case.get("u"),
        relative_sd=case.get("relative_sd"),
    )
    figures = _figures(curve) | _unknown(curve, case)
    return [
        CheckedValue(
            case["name"],
            case["source"],
            value["what"],
            value["value"],
            value["tolerance"],
            _finite(figures.get(value["what"])),
        )
        for value in case["values"]
    ]


def _figures(curve: Curve) -> dict[str, float]:
    """Parameters, their logarithm and reciprocal, standard uncertainties, and the residuals."""
    found = {"residual sd": curve.residual_sd, "residual sum": curve.residual_sum}
    for name, value in curve.parameters.items():
        found |= {name: value, f"u {name}": curve.standard_errors[name]}
        if value > 0:
            found |= {f"ln {name}": math.log(value), f"1/{name}": 1.0 / value}
    return found


def _unknown(curve: Curve, case: Mapping[str, Any]) -> dict[str, float]:
    if "unknown" not in case:
        return {}
    quantity = curve.invert([case["unknown"]], replicates=case["replicates"], interval="delta")
    return {"x0": float(quantity.value[0]), "u x0": float(quantity.u[0])}


def _finite(value: float | None) -> float | None:
    return value if value is not None and math.isfinite(value) else None
