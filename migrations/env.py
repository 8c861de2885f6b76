"""How the migrations run: in one transaction, with foreign keys off around it.

SQLite changes a table by building it again. With foreign keys on, that would delete the
children of the old table or fail; the pragma has no effect inside a transaction, so it is
switched off before, and what hangs loose is looked for at the end.
"""

from contextlib import nullcontext

from alembic import context
from sqlalchemy import Connection

import calib.store
from calib.errors import StoreDamaged


def refuse_orphans(connection: Connection) -> None:
    orphans = connection.exec_driver_sql("PRAGMA foreign_key_check").all()
    if orphans:
        table, row, parent = orphans[0][:3]
        raise StoreDamaged(
            f"the migration would leave {len(orphans)} rows that name a missing row, the first in {table}, "
            f"row {row}, of {parent}; nothing was changed"
        )


def run_migrations() -> None:
    around = context.config.attributes.get("around") or (lambda connection: nullcontext())
    with context.config.attributes["engine"].connect() as connection:
        driver = connection.connection.driver_connection
        driver.execute("PRAGMA foreign_keys = OFF")
        try:
            context.configure(
                connection=connection,
                target_metadata=calib.store.Base.metadata,
                render_as_batch=True,
                transactional_ddl=True,
            )
            with context.begin_transaction(), around(connection):
                context.run_migrations()
                refuse_orphans(connection)
        finally:
            driver.execute("PRAGMA foreign_keys = ON")


run_migrations()
