"""People with their roles and the rules of the laboratory about its records."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime, timedelta

from sqlalchemy import select
from sqlalchemy.orm import Session

from calib import store as tables
from calib.bench.durations import hours_of
from calib.bench.names import plain_name
from calib.errors import InputError

ROLES = ("analyst", "reviewer")
# What holds where nothing was set, and what each setting may say.
DEFAULTS = {"own-work": "refused", "late-after": "24 h"}
OWN_WORK = ("refused", "allowed")


@dataclass(frozen=True, slots=True)
class PersonRecord:
    """A person by the name that acts, with the roles in force; none: the person left."""

    name: str
    roles: tuple[str, ...]
    by: str
    at: datetime
    reason: str | None


@dataclass(frozen=True, slots=True)
class SettingRecord:
    """A rule about the records; ``by`` and the others are None where it was never set."""

    name: str
    value: str
    by: str | None = None
    at: datetime | None = None
    reason: str | None = None


def set_roles(
    store: tables.Store, name: str, roles: tuple[str, ...], *, by: str, reason: str | None = None
) -> PersonRecord:
    """Register a person, or give one other roles; the earlier roles stay on record.

    Raises
    ------
    InputError
        For an unknown role, a change without a reason, or roles that are held already.
    """
    name = plain_name(name, "the name of the person")
    unknown = [role for role in roles if role not in ROLES]
    if unknown:
        raise InputError(f"unknown role '{unknown[0]}'; known are {', '.join(ROLES)}")
    held = ("analyst" in roles, "reviewer" in roles)
    with store.change(action="set roles", by=by, reason=reason) as session:
        before = person_named(session, name)
        if before is not None and (before.analyst, before.reviewer) == held:
            raise InputError(f"{before.name} has these roles already; nothing to change")
        if before is not None and not (reason or "").strip():
            raise InputError(f"{before.name} has other roles so far; give the reason for the change")
        row = tables.Person(
            name=before.name if before else name,
            analyst=held[0],
            reviewer=held[1],
            supersedes=before.id if before else None,
            reason=reason,
            by=by,
            at=store.now(),
        )
        session.add(row)
    return _person(row)


def list_people(store: tables.Store) -> tuple[PersonRecord, ...]:
    """Everyone registered, with the roles in force."""
    query = select(tables.Person).where(tables.is_current(tables.Person)).order_by(tables.Person.name)
    with store.reading() as session:
        return tuple(_person(row) for row in session.scalars(query))


def person_named(session: Session, name: str) -> tables.Person | None:
    """The roles in force of a person; upper and lower case are the same name."""
    query = select(tables.Person).where(tables.is_current(tables.Person))
    return next((row for row in session.scalars(query) if same_person(row.name, name)), None)


def same_person(one: str, other: str) -> bool:
    """Whether two names mean one person: case and blanks around them do not count."""
    return one.strip().casefold() == other.strip().casefold()


def change_setting(store: tables.Store, name: str, value: str, *, by: str, reason: str) -> SettingRecord:
    """Set a rule of the laboratory, with the reason.

    Raises
    ------
    InputError
        For an unknown rule or value, or without a reason.
    """
    if name not in DEFAULTS:
        raise InputError(f"unknown setting '{name}'; known are {', '.join(DEFAULTS)}")
    if not reason.strip():
        raise InputError("a setting is changed for a reason; give it in words")
    if name == "own-work" and value not in OWN_WORK:
        raise InputError(f"own-work is {' or '.join(OWN_WORK)}, not '{value}'")
    if name == "late-after":
        hours_of(value, "late-after")
    with store.change(action=f"set {name}", by=by, reason=reason) as session:
        before = _setting_row(session, name)
        row = tables.Setting(
            name=name,
            value=value,
            supersedes=before.id if before else None,
            reason=reason,
            by=by,
            at=store.now(),
        )
        session.add(row)
    return SettingRecord(name, value, by, row.at, reason)


def list_settings(store: tables.Store) -> tuple[SettingRecord, ...]:
    """Every rule with the value in force."""
    with store.reading() as session:
        rows = {name: _setting_row(session, name) for name in DEFAULTS}
    return tuple(
        SettingRecord(name, row.value, row.by, row.at, row.reason)
        if row
        else SettingRecord(name, DEFAULTS[name])
        for name, row in rows.items()
    )


def own_work_allowed(session: Session) -> bool:
    """Whether a person may approve what they had a hand in."""
    return _value(session, "own-work") == "allowed"


def late_after(session: Session) -> timedelta:
    """Time from measuring to logging beyond which an entry is late."""
    return timedelta(hours=hours_of(_value(session, "late-after"), "late-after"))


def _value(session: Session, name: str) -> str:
    row = _setting_row(session, name)
    return row.value if row else DEFAULTS[name]


def _setting_row(session: Session, name: str) -> tables.Setting | None:
    return session.scalar(
        select(tables.Setting).where(tables.Setting.name == name, tables.is_current(tables.Setting))
    )


def _person(row: tables.Person) -> PersonRecord:
    roles = tuple(role for role, held in zip(ROLES, (row.analyst, row.reviewer), strict=True) if held)
    return PersonRecord(row.name, roles, row.by, row.at, row.reason)
