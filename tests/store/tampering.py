"""Change a store with a database tool, one thing at a time, and see whether the check names it."""

from __future__ import annotations

import random
import sqlite3
from collections.abc import Callable
from contextlib import closing
from dataclasses import dataclass
from pathlib import Path

from calib.store.triggers import EVIDENCE_TABLES

TIMES = {"at", "logged_at", "recorded_at", "added_at", "imported_at"}
GUARDS = [
    f"DROP TRIGGER IF EXISTS {t}_no_{act}" for t in EVIDENCE_TABLES for act in ("update", "delete", "insert")
]


@dataclass(frozen=True)
class Deed:
    """One change: its kind, what was done, and the places of which the check must name one."""

    kind: str
    what: str
    places: frozenset[str]


Tamper = Callable[[sqlite3.Connection, random.Random], Deed | None]


def tamper_with(path: Path, kind: str, chance: random.Random) -> Deed | None:
    """Do one random change of a kind with all triggers dropped; None where there is nothing to change."""
    with closing(sqlite3.connect(path)) as connection:
        for guard in GUARDS:
            connection.execute(guard)
        deed = KINDS[kind](connection, chance)
        connection.commit()
    return deed


def _row(connection: sqlite3.Connection, table: str, chance: random.Random) -> int | None:
    key = "sequence" if table == "record_chain" else "id"
    keys = [k for (k,) in connection.execute(f'SELECT "{key}" FROM "{table}"')]
    return chance.choice(keys) if keys else None


def _table(connection: sqlite3.Connection, chance: random.Random) -> str:
    filled = [
        t for t in EVIDENCE_TABLES
        if t != "record_chain" and connection.execute(f'SELECT 1 FROM "{t}" LIMIT 1').fetchone()
    ]  # fmt: skip
    return chance.choice(filled)


def _columns(connection: sqlite3.Connection, table: str) -> list[tuple[str, str]]:
    return [(row[1], row[2]) for row in connection.execute(f'PRAGMA table_info("{table}")')]


def _other(value: object, chance: random.Random) -> object:
    if isinstance(value, bytes):
        return bytes([value[0] ^ 1, *value[1:]]) if value else b"x"
    if isinstance(value, int):
        return value + 1
    if isinstance(value, float):
        return value * (1 + 10 ** -chance.uniform(1, 9)) if value else 1e-9
    if isinstance(value, str):
        return value + "x" if chance.random() < 0.5 or not value else value[:-1]
    return 1


def change_value(connection: sqlite3.Connection, chance: random.Random) -> Deed | None:
    table = _table(connection, chance)
    number = _row(connection, table, chance)
    columns = [c for c, _ in _columns(connection, table) if c not in TIMES and c != "id"]
    column = chance.choice(columns)
    (value,) = connection.execute(f'SELECT "{column}" FROM "{table}" WHERE id = ?', (number,)).fetchone()
    try:
        connection.execute(
            f'UPDATE "{table}" SET "{column}" = ? WHERE id = ?', (_other(value, chance), number)
        )
    except sqlite3.IntegrityError:
        return None  # the schema itself refused this one; another is tried
    return Deed("value", f"{table}.{column} of row {number}", frozenset({f"{table} {number}"}))


def change_time(connection: sqlite3.Connection, chance: random.Random) -> Deed | None:
    table = _table(connection, chance)
    columns = [c for c, _ in _columns(connection, table) if c in TIMES]
    if not columns:
        return None
    number, column = _row(connection, table, chance), chance.choice(columns)
    shift = f"{chance.choice((-1, 1)) * chance.randint(1, 100000)} seconds"
    connection.execute(
        f'UPDATE "{table}" SET "{column}" = strftime(\'%Y-%m-%d %H:%M:%f000\', "{column}", ?) '
        f'WHERE id = ? AND "{column}" IS NOT NULL',
        (shift, number),
    )
    if not connection.execute("SELECT changes()").fetchone()[0]:
        return None
    return Deed("time", f"{table}.{column} of row {number}", frozenset({f"{table} {number}"}))


def remove_row(connection: sqlite3.Connection, chance: random.Random) -> Deed | None:
    table = _table(connection, chance)
    number = _row(connection, table, chance)
    connection.execute(f'DELETE FROM "{table}" WHERE id = ?', (number,))
    return Deed("row removed", f"{table} {number}", frozenset({f"{table} {number}"}))


def add_row(connection: sqlite3.Connection, chance: random.Random) -> Deed | None:
    table = _table(connection, chance)
    number = _row(connection, table, chance)
    columns = [f'"{c}"' for c, _ in _columns(connection, table) if c not in ("id", "supersedes")]
    names = ", ".join(columns)
    try:
        added = connection.execute(
            f'INSERT INTO "{table}" ({names}) SELECT {names} FROM "{table}" WHERE id = ?', (number,)
        ).lastrowid
    except sqlite3.IntegrityError:
        return None
    return Deed("row added", f"{table} {added}", frozenset({f"{table} {added}"}))


def swap_rows(connection: sqlite3.Connection, chance: random.Random) -> Deed | None:
    table = chance.choice(["reading", "quantity", "curve_standard", "curve", "run_facts"])
    one, two = _row(connection, table, chance), _row(connection, table, chance)
    if one is None or two is None or one == two:
        return None
    for before, after in ((one, -1), (two, one), (-1, two)):
        connection.execute(f'UPDATE "{table}" SET id = ? WHERE id = ?', (after, before))
    return Deed("rows swapped", f"{table} {one} and {two}", frozenset({f"{table} {one}", f"{table} {two}"}))


def change_original(connection: sqlite3.Connection, chance: random.Random) -> Deed | None:
    number = _row(connection, "original", chance)
    (content,) = connection.execute("SELECT content FROM original WHERE id = ?", (number,)).fetchone()
    place = chance.randrange(len(content))
    changed = content[:place] + bytes([content[place] ^ (1 << chance.randrange(8))]) + content[place + 1 :]
    connection.execute("UPDATE original SET content = ? WHERE id = ?", (changed, number))
    return Deed("original", f"one bit of original {number}", frozenset({f"original {number}"}))


def change_entry(connection: sqlite3.Connection, chance: random.Random) -> Deed | None:
    number = _row(connection, "record_chain", chance)
    column = chance.choice(["at", "by", "action", "payload", "hash", "previous_hash", "offset_minutes"])
    (value,) = connection.execute(
        f'SELECT "{column}" FROM record_chain WHERE sequence = ?', (number,)
    ).fetchone()
    changed = value.replace("20", "19", 1) if column == "at" else _other(value, chance)
    connection.execute(f'UPDATE record_chain SET "{column}" = ? WHERE sequence = ?', (changed, number))
    places = frozenset({f"entry {number}", f"entry {(number or 0) + 1}"})
    return Deed("entry changed", f"record_chain.{column} of entry {number}", places)


def remove_entry(connection: sqlite3.Connection, chance: random.Random) -> Deed | None:
    number = _row(connection, "record_chain", chance) or 0
    connection.execute("DELETE FROM record_chain WHERE sequence = ?", (number,))
    return Deed("entry removed", f"entry {number}", frozenset({f"entry {number + 1}", f"entry {number - 1}"}))


KINDS: dict[str, Tamper] = {
    "value": change_value,
    "time": change_time,
    "row removed": remove_row,
    "row added": add_row,
    "rows swapped": swap_rows,
    "original": change_original,
    "entry changed": change_entry,
    "entry removed": remove_entry,
}
