"""Triggers: a general SQLite tool cannot change, remove or replace evidence."""

import sqlite3
from collections.abc import Callable

import pytest

from calib.store import Base, Store
from calib.store.triggers import EVIDENCE_TABLES, trigger_statements


def test_every_table_is_evidence() -> None:
    assert set(EVIDENCE_TABLES) == set(Base.metadata.tables)


@pytest.mark.parametrize("table", ["instrument", "run", "reading", "curve", "original", "record_chain"])
def test_update_and_delete_are_refused(filled: Store, tamper: Callable[..., None], table: str) -> None:
    key = "sequence" if table == "record_chain" else "id"
    with pytest.raises(sqlite3.IntegrityError, match="never changed"):
        tamper(f"UPDATE {table} SET {key} = {key} + 100")
    with pytest.raises(sqlite3.IntegrityError, match="never removed"):
        tamper(f"DELETE FROM {table}")


@pytest.mark.parametrize("table", ["instrument", "reading", "curve", "record_chain"])
def test_replacing_by_primary_key_is_refused(filled: Store, tamper: Callable[..., None], table: str) -> None:
    with pytest.raises(sqlite3.IntegrityError, match="never replaced"):
        tamper(f"INSERT OR REPLACE INTO {table} SELECT * FROM {table} LIMIT 1")


def test_replacing_by_another_unique_key_is_refused(filled: Store, tamper: Callable[..., None]) -> None:
    # SQLite calls no DELETE trigger for the row it replaces unless recursive_triggers is on, and a
    # general tool has it off (https://www.sqlite.org/lang_conflict.html, REPLACE).
    with pytest.raises(sqlite3.IntegrityError, match="this name is taken"):
        tamper(
            "INSERT OR REPLACE INTO instrument "
            "(name, kind, serial, location, utc_offset_minutes, added_at, added_by) "
            "VALUES ('PP-a', 'k', 's', 'l', 0, '2026-03-02 00:00:00.000000', 'XX')"
        )


@pytest.mark.parametrize("name", EVIDENCE_TABLES)
def test_other_databases_get_triggers_from_the_same_list(name: str) -> None:
    # Only the text: the rules are not tried on a PostgreSQL server here.
    statements = trigger_statements(Base.metadata.tables[name], "postgresql")
    assert f'BEFORE UPDATE OR DELETE ON "{name}"' in statements[f"{name}_no_change"]
