"""Invented rows of the fictional Ostrel Lake Laboratory."""

import hashlib
from datetime import UTC, datetime, timedelta

from sqlalchemy.orm import Session

from calib import store as st

AT = datetime(2026, 3, 2, 7, 12, tzinfo=UTC)


def instrument(name: str = "PP-2", **other: object) -> st.Instrument:
    facts = {
        "name": name,
        "kind": "plate photometer",
        "serial": "4471",
        "location": "bench 2",
        "response_ceiling": 4.0,
        "utc_offset_minutes": 60,
        "added_at": AT,
        "added_by": "KM",
    }
    return st.Instrument(**{**facts, **other})


def original(content: bytes) -> st.Original:
    return st.Original(
        fingerprint=hashlib.sha256(content).hexdigest(),
        name="plate.csv",
        size=len(content),
        content=content,
        imported_at=AT,
    )


def method(version: int = 1) -> st.Method:
    return st.Method(
        name="toxin-plate",
        version=version,
        definition="name = 'x'",
        fingerprint="f",
        added_at=AT,
        added_by="KM",
    )


def run(original_id: int, method_id: int) -> st.Run:
    return st.Run(
        kind="calibration",
        original_id=original_id,
        method_id=method_id,
        layout="plate-grid",
        reader_version="1",
        concentration_unit="ug/L",
        response_unit="1",
        content_fingerprint="c",
        logged_at=AT,
        logged_by="KM",
    )


def facts(run_id: int, instrument_id: int, **other: object) -> st.RunFacts:
    held = {"at": AT, "offset_minutes": 60, "operator": "KM", "by": "KM", "recorded_at": AT}
    return st.RunFacts(run_id=run_id, instrument_id=instrument_id, **{**held, **other})


def reading(run_id: int, ordinal: int, **other: object) -> st.Reading:
    held = {
        "sample": f"S{ordinal}",
        "role": "standard",
        "concentration": 0.1 * ordinal,
        "response": 1.0 / (1 + ordinal),
        "response_text": "0.5",
        "dilution": 1,
        "at": AT + timedelta(seconds=ordinal),
    }
    return st.Reading(run_id=run_id, ordinal=ordinal, **{**held, **other})


def curve(run_id: int, **other: object) -> st.Curve:
    held = {
        "model": "line",
        "fixed": {},
        "bounds": {"slope": [0.0, None]},
        "noise": {"kind": "uniform"},
        "parameters": {"intercept": -0.0, "slope": 0.1 + 0.2},
        "covariance": [[1e-6, None], [None, 1e-9]],
        "undetermined": [],
        "degrees_of_freedom": 3,
        "converged": True,
        "findings": [],
        "solver": "least-squares",
        "versions": {"numpy": "2"},
        "by": "KM",
        "at": AT,
    }
    return st.Curve(run_id=run_id, **{**held, **other})


def add_run(session: Session, mark: str = "a", readings: int = 5) -> st.Run:
    """Add one whole run with everything it stands on."""
    device, file = instrument(f"PP-{mark}"), original(mark.encode())
    version = method(int.from_bytes(mark.encode()[:6], "big"))
    session.add_all([device, file, version])
    session.flush()
    added = run(file.id, version.id)
    session.add(added)
    session.flush()
    session.add(facts(added.id, device.id))
    session.add_all(reading(added.id, ordinal) for ordinal in range(readings))
    session.add(curve(added.id))
    return added
