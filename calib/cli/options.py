"""Options and small things that several commands share."""

from __future__ import annotations

import json
import os
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from datetime import datetime
from typing import TYPE_CHECKING, Any, TypeVar

import click

from calib.errors import InputError

if TYPE_CHECKING:
    from calib.store import Store

F = TypeVar("F", bound=Callable[..., Any])

REJECTED = 3
DAMAGED = 4

FIRST_YEAR, LAST_YEAR = 1950, 2200  # as for the times in a file


def by_option(command: F) -> F:
    """Add --by: who acts. It records a name and does not prove an identity."""
    return click.option(
        "--by", metavar="NAME", help="Who acts (recorded, not proven). Else $CALIB_BY, else the login name."
    )(command)


def json_option(command: F) -> F:
    """Add --json: full precision for machines."""
    return click.option("--json", "as_json", is_flag=True, help="Print JSON, full precision.")(command)


def reason_option(command: F) -> F:
    """Add --reason: every correction has one."""
    return click.option("--reason", required=True, metavar="TEXT", help="Why, in words.")(command)


def acting(by: str | None) -> str:
    """Name of the person who acts."""
    import getpass

    name = (by or os.environ.get("CALIB_BY") or "").strip()
    if name:
        return name
    try:
        return getpass.getuser()
    except (KeyError, OSError) as cause:
        raise InputError("nobody is named: give --by NAME") from cause


def store_address(ctx: click.Context) -> str | None:
    """Address of the store that was asked for; None for the one in the user's data folder."""
    return ctx.find_root().obj or os.environ.get("CALIB_STORE") or None


def _seconds(variable: str, default: float) -> float:
    text = os.environ.get(variable)
    if text is None:
        return default
    try:
        seconds = float(text)
    except ValueError:
        seconds = -1.0
    if not 0 <= seconds <= 3600:
        raise InputError(f"{variable} = {text!r} must be a number of seconds from 0 to 3600")
    return seconds


@contextmanager
def opened(ctx: click.Context, *, create: bool = False) -> Iterator[Store]:
    """The store this command works on."""
    from calib.bench.keep_store import open_laboratory_store

    store = open_laboratory_store(
        store_address(ctx), create=create, busy_seconds=_seconds("CALIB_BUSY_SECONDS", 30.0)
    )
    try:
        yield store
    finally:
        store.close()


def moment(text: str | None, option: str = "--at") -> datetime | None:
    """A time as people write it; without an offset it is the instrument's own."""
    if text is None:
        return None
    try:
        at = datetime.fromisoformat(text)
    except ValueError as cause:
        raise InputError(
            f"{option} {text!r} is no time; write 2026-03-02T08:20, with +01:00 if needed"
        ) from cause
    if not FIRST_YEAR <= at.year <= LAST_YEAR:
        raise InputError(f"{option} {text!r} lies outside {FIRST_YEAR} to {LAST_YEAR}; correct the year")
    return at


def echo_json(value: Any) -> None:
    """Print JSON, in ASCII so that no terminal or pipe can bend it; NaN cannot occur in it."""
    click.echo(json.dumps(value, indent=2, allow_nan=False))
