"""Is the store as it was built: file, references, triggers, columns, one version in force."""

from collections.abc import Iterator
from typing import Any

from sqlalchemy import Connection, Table, exists, func, select

from calib.store.base import Base
from calib.store.findings import StoreFinding
from calib.store.triggers import EVIDENCE_TABLES, VERSIONED, trigger_statements


def file_findings(connection: Connection) -> Iterator[StoreFinding]:
    """Let SQLite check its own pages and indices."""
    for (text,) in connection.exec_driver_sql("PRAGMA integrity_check"):
        if text != "ok":
            yield StoreFinding("integrity", "file", " ".join(str(text).split()))


def reference_findings(connection: Connection) -> Iterator[StoreFinding]:
    """Find rows that name a row that is not there."""
    for table, row, parent, _ in connection.exec_driver_sql("PRAGMA foreign_key_check"):
        yield StoreFinding("reference", f"{table} {row}", f"names a row of {parent} that is not there")


def trigger_findings(connection: Connection) -> Iterator[StoreFinding]:
    """Find triggers that are missing, or are not the ones that were made."""
    query = "SELECT name, sql FROM sqlite_master WHERE type = 'trigger'"
    held: dict[str, str] = {row.name: row.sql for row in connection.exec_driver_sql(query)}
    for name in EVIDENCE_TABLES:
        wanted = trigger_statements(Base.metadata.tables[name], connection.dialect.name)
        for trigger, statement in wanted.items():
            if trigger not in held:
                yield StoreFinding(
                    "trigger-missing", name, f"trigger {trigger} is missing: rows are not protected"
                )
            elif held[trigger] != statement:
                yield StoreFinding("trigger-changed", name, f"trigger {trigger} is not the one that was made")


def table_findings(connection: Connection) -> Iterator[StoreFinding]:
    """Find tables, columns, keys and indices that differ from those of this calib."""
    from alembic.autogenerate import compare_metadata
    from alembic.migration import MigrationContext

    for difference in compare_metadata(MigrationContext.configure(connection), Base.metadata):
        for step in difference if isinstance(difference, list) else [difference]:
            place, message = _difference_in_words(step)
            yield StoreFinding("schema", place, message)


def _difference_in_words(step: Any) -> tuple[str, str]:
    """Say what a step means that Alembic proposes to make the tables like the models."""
    act, *things = step
    if act.startswith("modify_"):
        return str(things[1]), f"column {things[2]} differs in its {act.removeprefix('modify_')}"
    thing = things[-1]
    what = act.split("_", 1)[1].replace("fk", "foreign key")
    place = thing.name if isinstance(thing, Table) else getattr(getattr(thing, "table", None), "name", "file")
    state = "is missing" if act.startswith("add_") else "does not belong here"
    return str(place), f"{what} {thing.name} {state}"


def version_findings(connection: Connection) -> Iterator[StoreFinding]:
    """Find records with two versions in force, runs without facts, versions of another record."""
    for name, record in VERSIONED.items():
        yield from _strangers(connection, Base.metadata.tables[name], record[0])
        yield from _two_in_force(connection, Base.metadata.tables[name], record)
    run, facts = Base.metadata.tables["run"], Base.metadata.tables["run_facts"]
    bare = select(run.c.id).where(run.c.id.not_in(select(facts.c.run_id)))
    for (number,) in connection.execute(bare):
        yield StoreFinding(
            "no-facts", f"run {number}", "has no facts: instrument, operator and time are missing"
        )


def _strangers(connection: Connection, table: Table, shared: str) -> Iterator[StoreFinding]:
    older = table.alias()
    query = select(table.c.id, older.c.id).where(
        table.c.supersedes == older.c.id, table.c[shared] != older.c[shared]
    )
    for number, other in connection.execute(query):
        yield StoreFinding(
            "wrong-version",
            f"{table.name} {number}",
            f"supersedes row {other}, which has another {shared}",
        )


def _two_in_force(connection: Connection, table: Table, record: tuple[str, ...]) -> Iterator[StoreFinding]:
    later = table.alias()
    columns = [table.c[name] for name in record]
    query = (
        select(func.min(table.c.id), func.count(), columns[0])
        .where(~exists().where(later.c.supersedes == table.c.id))
        .group_by(*columns)
        .having(func.count() > 1)
    )
    for number, count, owner in connection.execute(query):
        yield StoreFinding(
            "two-in-force",
            f"{record[0].removesuffix('_id')} {owner}",
            f"has {count} rows of {table.name} in force instead of one, the first is row {number}",
        )
