"""Migrations: they end where the models are, and go both ways."""

import shutil
import subprocess
import sys
from pathlib import Path

import pytest
from alembic import command
from alembic.autogenerate import compare_metadata
from alembic.migration import MigrationContext
from alembic.script import ScriptDirectory
from sqlalchemy import Engine, inspect

from calib.store import Base, Store, open_store
from calib.store.check_schema import trigger_findings
from calib.store.migrating import migrate, migration_config
from calib.store.schema import REVISIONS
from calib.store.triggers import EVIDENCE_TABLES


def differences(engine: Engine) -> list[object]:
    with engine.connect() as connection:
        return compare_metadata(MigrationContext.configure(connection), Base.metadata)


def test_head_equals_the_models(store: Store) -> None:
    assert differences(store.engine) == []


def test_known_revisions_are_those_of_the_scripts(store: Store) -> None:
    scripts = ScriptDirectory.from_config(migration_config(store.engine)).walk_revisions()
    assert tuple(reversed([script.revision for script in scripts])) == REVISIONS


def test_down_and_up_again(store: Store) -> None:
    command.downgrade(migration_config(store.engine), "base")
    with store.engine.connect() as connection:
        assert not set(EVIDENCE_TABLES) & set(inspect(connection).get_table_names())
    migrate(store.engine)
    assert differences(store.engine) == []
    with store.engine.connect() as connection:
        assert list(trigger_findings(connection)) == []


def test_foreign_keys_are_on_again_after_a_migration(store: Store) -> None:
    migrate(store.engine)
    with store.engine.connect() as connection:
        assert connection.exec_driver_sql("PRAGMA foreign_keys").scalar() == 1


@pytest.mark.parametrize(
    ("pragma", "value"),
    [
        ("journal_mode", "wal"),
        ("foreign_keys", 1),
        ("recursive_triggers", 1),
        ("synchronous", 2),
        ("busy_timeout", 1500),
    ],
)
def test_pragmas_of_each_connection(path: Path, pragma: str, value: object) -> None:
    with open_store(path, busy_seconds=1.5) as store, store.engine.connect() as connection:
        assert connection.exec_driver_sql(f"PRAGMA {pragma}").scalar() == value


def test_an_installed_package_finds_the_migrations_inside_it(tmp_path: Path) -> None:
    checkout = Path(__file__).parents[2]
    package = tmp_path / "calib"
    shutil.copytree(checkout / "calib" / "store", package / "store")
    shutil.copytree(checkout / "migrations", package / "migrations")
    for name in ("errors.py", "shipped.py"):
        shutil.copy(checkout / "calib" / name, package / name)
    (package / "__init__.py").write_text('"""Only what the store needs."""\n')
    program = "from calib.store import open_store; s = open_store('lab.db'); print(s.head()[0]); s.close()"
    done = subprocess.run(
        [sys.executable, "-c", program], cwd=tmp_path, capture_output=True, text=True, check=True
    )
    assert done.stdout.strip() == "0"
