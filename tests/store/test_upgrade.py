"""Upgrades: a backup first, all rows kept, the store as before if anything fails."""

import shutil
import sqlite3
from contextlib import closing
from pathlib import Path

import pytest

from calib.errors import SchemaTooNew, StoreDamaged
from calib.shipped import shipped
from calib.store import Store, check_store, open_store, upgrade_store
from calib.store.schema import REVISIONS

NEXT = """
import sqlalchemy as sa
from alembic import op
from calib.store.triggers import create_triggers

revision = "9999"
down_revision = "{before}"

def upgrade():
    with op.batch_alter_table(
        "instrument", recreate="always", table_kwargs={{"sqlite_autoincrement": True}}
    ) as batch:
        batch.add_column(sa.Column("colour", sa.String(), nullable=True))
    {then}

def downgrade():
    pass
"""
NEWEST = REVISIONS[-1]
WHOLE = 'create_triggers(op.get_bind(), ["instrument"])'
FORGETS_TRIGGERS = "pass"
LOSES_ROWS = 'op.execute("DELETE FROM instrument WHERE id = 2"); ' + WHOLE
FAILS = "1 / 0"


@pytest.fixture
def next_schema(filled: Store, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """The file where the migration of a later calib is to be written; the store is filled and closed."""
    filled.close()
    folder = tmp_path / "migrations"
    shutil.copytree(shipped("migrations"), folder)
    monkeypatch.setattr("calib.store.migrating.shipped", lambda _: folder)
    monkeypatch.setattr("calib.store.schema.REVISIONS", (*REVISIONS, "9999"))
    return folder / "versions" / "9999_next.py"


def dump(path: Path) -> list[str]:
    with closing(sqlite3.connect(path)) as connection:
        return list(connection.iterdump())


def test_nothing_to_do_leaves_no_backup(filled: Store) -> None:
    upgrade = upgrade_store(filled.path)
    assert (upgrade.before, upgrade.after, upgrade.backup) == (NEWEST, NEWEST, None)


def test_a_parent_table_is_built_again_and_all_rows_are_kept(next_schema: Path, path: Path) -> None:
    next_schema.write_text(NEXT.format(before=NEWEST, then=WHOLE))
    before = dump(path)
    upgrade = upgrade_store(path)
    assert (upgrade.before, upgrade.after) == (NEWEST, "9999")
    assert (upgrade.rows["instrument"], upgrade.rows["reading"]) == (2, 10)
    assert upgrade.backup is not None
    assert dump(upgrade.backup) == before
    with open_store(path, create=False) as store:
        found = check_store(store).findings
    # The models of the test have no such column; that is all the check has to say.
    assert [finding.message for finding in found] == ["column colour does not belong here"]


@pytest.mark.parametrize(
    ("then", "error", "words"),
    [
        (FORGETS_TRIGGERS, StoreDamaged, "trigger instrument_no_update is missing"),
        (LOSES_ROWS, StoreDamaged, "1 of 2 rows of instrument|name a missing row"),
        (FAILS, ZeroDivisionError, "division"),
    ],
)
def test_a_migration_that_fails_leaves_the_store_as_it_was(
    next_schema: Path, path: Path, then: str, error: type[Exception], words: str
) -> None:
    next_schema.write_text(NEXT.format(before=NEWEST, then=then))
    before = dump(path)
    with pytest.raises(error, match=words):
        upgrade_store(path)
    assert dump(path) == before


def test_a_newer_store_is_not_upgraded(filled: Store, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("calib.store.schema.REVISIONS", ("0000",))
    with pytest.raises(SchemaTooNew):
        upgrade_store(filled.path)
