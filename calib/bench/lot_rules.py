"""Which standard lot a run may use: registered and in date, or overridden with a reason."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime

from sqlalchemy.orm import Session

from calib import store as tables
from calib.bench.find import solution_named
from calib.errors import InputError, NotFound

HOW = "or log it all the same with --override-lot and the reason"


@dataclass(frozen=True, slots=True)
class Override:
    """A person's decision against a rule: what the rule found, and why it is set aside."""

    what: str
    reason: str


def usable_lot(
    session: Session, name: str | None, at: datetime, reason: str | None
) -> tuple[tables.StandardLot | tables.Preparation | None, tuple[Override, ...]]:
    """Find the standard lot or prepared solution of that name, and refuse one that is unknown or expired.

    Parameters
    ----------
    session : Session
    name : str or None
        None where no lot is named.
    at : datetime
        When it was used.
    reason : str or None
        Why a refusal is overridden.

    Raises
    ------
    NotFound, InputError
        When it is not registered, or expired before it was used, and there is no reason to override.
    """
    if reason is not None and not reason.strip():
        raise InputError("overriding the rule for standard lots needs a reason in words")
    if name is None:
        return None, ()
    try:
        lot = solution_named(session, name)
    except NotFound as unknown:
        if reason is None:
            raise NotFound(f"{unknown}; {HOW}") from unknown
        return None, (Override(f"standard lot {name} is not registered", reason),)
    if lot.expiry is None or at.date() <= lot.expiry:
        return lot, ()
    kind = "prepared solution" if isinstance(lot, tables.Preparation) else "standard lot"
    what = f"{kind} {name} expired on {lot.expiry.isoformat()}, before this run"
    if reason is None:
        raise InputError(f"{what}; calibrate with one in date, {HOW}")
    return lot, (Override(what, reason),)
