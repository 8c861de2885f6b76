"""Run the migrations; the one place of the store that imports Alembic, and only when called."""

from collections.abc import Callable
from contextlib import AbstractContextManager
from typing import TYPE_CHECKING

from sqlalchemy import Connection, Engine

from calib.shipped import shipped
from calib.store.session import WRITING

if TYPE_CHECKING:
    from alembic.config import Config

Around = Callable[[Connection], AbstractContextManager[None]]


def migration_config(engine: Engine) -> "Config":
    """Configure Alembic for one store: the shipped migrations, the given engine."""
    from alembic.config import Config

    config = Config()
    config.set_main_option("script_location", str(shipped("migrations")).replace("%", "%%"))
    config.set_main_option("path_separator", "os")
    config.attributes["engine"] = engine.execution_options(**{WRITING: True})
    return config


def migrate(engine: Engine, revision: str = "head", around: Around | None = None) -> None:
    """Bring a store to a schema, in one transaction: whole or not at all.

    Parameters
    ----------
    engine : Engine
        Of the store file.
    revision : str
        Where to go; the newest schema by default.
    around : callable, optional
        Given the connection, makes a context that is entered before the first
        migration and left after the last, inside the same transaction.
    """
    from alembic import command

    config = migration_config(engine)
    config.attributes["around"] = around
    command.upgrade(config, revision)
