"""What was decided about a run after it was logged, oldest first."""

from __future__ import annotations

from collections.abc import Callable
from datetime import datetime, timedelta, timezone

from sqlalchemy import select
from sqlalchemy.orm import Session, aliased

from calib import store as tables
from calib.bench.find import preparation_of, void_of
from calib.bench.records import Amendment
from calib.store.entries import entry_of, recorded_rows


def amendments_of(session: Session, run: tables.Run) -> tuple[Amendment, ...]:
    """Every later decision about a run, and what it changed from and to."""
    found = [
        *_overrides(session, run),
        *_exclusions(session, run),
        *_changed_facts(session, run),
        *_changed_readings(session, run),
        *_refits(session, run),
        *_read_again(session, run),
    ]
    void = void_of(session, run.id)
    if void:
        found.append(Amendment(void.at, void.by, "declared void", void.reason))
    return tuple(sorted(found, key=lambda a: a.at))


def _overrides(session: Session, run: tables.Run) -> list[Amendment]:
    rows = session.scalars(select(tables.RuleOverride).where(tables.RuleOverride.run_id == run.id))
    return [Amendment(o.at, o.by, f"overrode a rule: {o.what}", o.reason) for o in rows]


def _exclusions(session: Session, run: tables.Run) -> list[Amendment]:
    rows = session.execute(
        select(tables.Exclusion, tables.Reading)
        .join(tables.Reading, tables.Reading.id == tables.Exclusion.reading_id)
        .where(tables.Reading.run_id == run.id)
    ).all()
    return [Amendment(e.at, e.by, _exclusion_in_words(e, r), e.reason) for e, r in rows]


def _exclusion_in_words(exclusion: tables.Exclusion, reading: tables.Reading) -> str:
    where = f"{reading.sample} ({reading.position})" if reading.position else reading.sample
    if exclusion.decision == "restore":
        return f"restored {where}"
    return f"excluded {where}, {exclusion.reason_class}"


def _changed_facts(session: Session, run: tables.Run) -> list[Amendment]:
    old, new = aliased(tables.RunFacts), aliased(tables.RunFacts)
    pairs = session.execute(
        select(old, new).join(new, new.supersedes == old.id).where(new.run_id == run.id)
    ).all()
    found = []
    for before, after in pairs:
        changes = _differences(session, before, after)
        if changes:
            found.append(Amendment(after.recorded_at, after.by, f"amended {changes}", after.reason or ""))
    return found


def _differences(session: Session, before: tables.RunFacts, after: tables.RunFacts) -> str:
    facts: tuple[tuple[str, Callable[[tables.RunFacts], str]], ...] = (
        ("instrument", lambda f: session.get_one(tables.Instrument, f.instrument_id).name),
        ("lot", lambda f: _material(session, f)),
        ("time", lambda f: f"{_on_its_clock(f.at, f.offset_minutes):%Y-%m-%d %H:%M:%S %z}"),
        ("operator", lambda f: f.operator),
    )
    return ", ".join(
        f"{name} from {say(before)} to {say(after)}" for name, say in facts if say(before) != say(after)
    )


def _material(session: Session, facts: tables.RunFacts) -> str:
    prepared = preparation_of(session, facts)
    if prepared is not None:
        return prepared.name
    return session.get_one(tables.StandardLot, facts.lot_id).name if facts.lot_id else "none"


def _on_its_clock(at: datetime, offset_minutes: int) -> datetime:
    return at.astimezone(timezone(timedelta(minutes=offset_minutes)))


def _changed_readings(session: Session, run: tables.Run) -> list[Amendment]:
    """Renamed samples and corrected dilutions; when, who and why stand in the entry that recorded them."""
    old, new = aliased(tables.Reading), aliased(tables.Reading)
    pairs = session.execute(
        select(old, new).join(new, new.supersedes == old.id).where(new.run_id == run.id).order_by(new.id)
    ).all()
    changes: dict[int | None, dict[str, None]] = {}
    recorded: set[int] = set()
    for before, after in pairs:
        if after.id not in recorded:
            sequence = entry_of(session.connection(), "reading", after.id)
            recorded = recorded_rows(session.connection(), sequence or 0).get("reading", set())
        told = changes.setdefault(sequence, {})
        if before.sample != after.sample:
            told[f"sample {before.sample} renamed {after.sample}"] = None
        if before.dilution != after.dilution:
            told[f"dilution of {after.sample} from {before.dilution:g} to {after.dilution:g}"] = None
    entries = session.scalars(select(tables.ChainEntry).where(tables.ChainEntry.sequence.in_(changes)))
    return [Amendment(e.at, e.by, "; ".join(changes[e.sequence]), e.reason or "") for e in entries]


def _refits(session: Session, run: tables.Run) -> list[Amendment]:
    rows = session.scalars(
        select(tables.Curve).where(tables.Curve.run_id == run.id, tables.Curve.supersedes.is_not(None))
    )
    return [
        Amendment(c.at, c.by, f"curve {c.id} superseded curve {c.supersedes}", c.reason or "") for c in rows
    ]


def _read_again(session: Session, run: tables.Run) -> list[Amendment]:
    """A run of unknowns whose curve was superseded: its samples were read again on the new one."""
    if run.curve_id is None:
        return []
    rows = session.scalars(
        select(tables.Curve)
        .where(
            tables.Curve.id.in_(
                select(tables.QuantityRow.curve_id).where(
                    tables.QuantityRow.run_id == run.id, tables.QuantityRow.supersedes.is_not(None)
                )
            ),
            tables.Curve.supersedes.is_not(None),
        )
        .order_by(tables.Curve.id)
    )
    return [
        Amendment(
            c.at,
            c.by,
            f"samples read again on curve {c.id}, because run {c.run_id} was corrected; "
            f"the values on curve {c.supersedes} are kept",
            c.reason or "",
        )
        for c in rows
    ]
