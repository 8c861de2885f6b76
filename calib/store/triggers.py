"""Triggers that keep evidence: no row is changed, removed or replaced.

One list of tables makes the triggers of each database. The SQLite triggers are
tested; those of PostgreSQL are the same rules, kept here for the day it is used.
"""

from collections.abc import Iterator, Sequence

from sqlalchemy import Connection, MetaData, PrimaryKeyConstraint, Table, UniqueConstraint

from calib.errors import StoreError

EVIDENCE_TABLES = (
    "instrument",
    "event",
    "method",
    "standard_lot",
    "preparation",
    "preparation_check",
    "run_solution",
    "original",
    "run",
    "run_facts",
    "run_void",
    "rule_override",
    "reading",
    "exclusion",
    "curve",
    "curve_standard",
    "verdict",
    "quantity",
    "record_chain",
)

_POSTGRESQL_REFUSAL = (
    "CREATE OR REPLACE FUNCTION calib_refuse_change() RETURNS trigger LANGUAGE plpgsql AS $$ "
    "BEGIN RAISE EXCEPTION '% is evidence: a row is never changed or removed; add one that supersedes it', "
    "TG_TABLE_NAME; END $$"
)


def trigger_statements(table: Table, dialect: str) -> dict[str, str]:
    """Write the SQL of the triggers that keep one table.

    Parameters
    ----------
    table : Table
        The table with its keys, from the models or read from a database.
    dialect : str
        ``"sqlite"`` or ``"postgresql"``.

    Returns
    -------
    dict
        Name of each trigger to the statement that creates it.

    Raises
    ------
    StoreError
        If the database is another one.
    """
    if dialect == "sqlite":
        return _sqlite_triggers(table)
    if dialect == "postgresql":
        return _postgresql_triggers(table)
    raise StoreError(f"no evidence triggers are known for {dialect}; use an SQLite store")


def create_triggers(connection: Connection, tables: Sequence[str]) -> None:
    """Make the triggers of tables as they are in the database now.

    The keys are read from the database, not from the models, so that a migration of
    any age makes the triggers that fit the table it leaves behind.
    """
    dialect = connection.dialect.name
    if dialect == "postgresql":
        connection.exec_driver_sql(_POSTGRESQL_REFUSAL)
    for name in tables:
        table = Table(name, MetaData(), autoload_with=connection, resolve_fks=False)
        for statement in trigger_statements(table, dialect).values():
            connection.exec_driver_sql(statement)


def _keys(table: Table) -> Iterator[tuple[str, ...]]:
    """Columns of the primary key, then of each unique constraint in alphabetical order."""
    yield tuple(column.name for column in table.primary_key.columns)
    yield from sorted(
        tuple(column.name for column in constraint.columns)
        for constraint in table.constraints
        if isinstance(constraint, UniqueConstraint) and not isinstance(constraint, PrimaryKeyConstraint)
    )


def _sqlite_triggers(table: Table) -> dict[str, str]:
    name = table.name
    bodies = {
        "UPDATE": _refuse(name, "a row is never changed; add one that supersedes it") + ";",
        "DELETE": _refuse(name, "a row is never removed; add one that supersedes it") + ";",
        "INSERT": " ".join(_refuse_taken(name, key) for key in _keys(table)),
    }
    return {
        trigger: f'CREATE TRIGGER "{trigger}" BEFORE {act} ON "{name}" BEGIN {body} END'
        for act, body in bodies.items()
        for trigger in (f"{name}_no_{act.lower()}",)
    }


def _refuse(table: str, words: str) -> str:
    return f"SELECT RAISE(ABORT, '{table} is evidence: {words}')"


def _refuse_taken(table: str, key: tuple[str, ...]) -> str:
    # A replaced unique key counts too: without recursive_triggers, SQLite's INSERT OR REPLACE
    # removes the older row and calls no DELETE trigger.
    same = " AND ".join(f'"{column}" = NEW."{column}"' for column in key)
    words = f"this {' and '.join(key)} is taken; a row is never replaced"
    return f'{_refuse(table, words)} WHERE EXISTS (SELECT 1 FROM "{table}" WHERE {same});'


def _postgresql_triggers(table: Table) -> dict[str, str]:
    # INSERT … ON CONFLICT DO UPDATE calls the UPDATE trigger, so there is no third one for replacing.
    name = table.name
    acts = {f"{name}_no_change": "UPDATE OR DELETE", f"{name}_no_truncate": "TRUNCATE"}
    scope = {f"{name}_no_change": "ROW", f"{name}_no_truncate": "STATEMENT"}
    return {
        trigger: f'CREATE TRIGGER "{trigger}" BEFORE {act} ON "{name}" '
        f"FOR EACH {scope[trigger]} EXECUTE FUNCTION calib_refuse_change()"
        for trigger, act in acts.items()
    }
