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
    "uncertainty_basis",
    "person",
    "setting",
    "review",
    "issued_report",
    "action",
    "action_result",
    "action_closure",
    "verification",
    "record_chain",
)

# Tables whose rows supersede each other, and the columns that say which record a row is a version of.
VERSIONED: dict[str, tuple[str, ...]] = {
    "run_facts": ("run_id",),
    "reading": ("run_id", "ordinal"),
    "exclusion": ("reading_id",),
    "curve": ("run_id",),
    "uncertainty_basis": ("run_id",),
    "quantity": ("run_id", "sample", "role", "dilution", "nominal"),
    "person": ("name",),
    "setting": ("name",),
    "review": ("run_id",),
    "issued_report": ("run_id", "format"),
}

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
    any age makes the triggers that fit the table it leaves behind. Triggers that are
    there already are made again.
    """
    dialect = connection.dialect.name
    if dialect == "postgresql":
        connection.exec_driver_sql(_POSTGRESQL_REFUSAL)
    for name in tables:
        table = Table(name, MetaData(), autoload_with=connection, resolve_fks=False)
        for trigger, statement in trigger_statements(table, dialect).items():
            if dialect == "sqlite":
                connection.exec_driver_sql(f'DROP TRIGGER IF EXISTS "{trigger}"')
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
    if name in VERSIONED:
        bodies["INSERT"] += f" {_refuse_second(name, VERSIONED[name])}"
    return {
        trigger: f'CREATE TRIGGER "{trigger}" BEFORE {act} ON "{name}" BEGIN {body} END'
        for act, body in bodies.items()
        for trigger in (f"{name}_no_{act.lower()}",)
    }


def _refuse_second(table: str, record: tuple[str, ...]) -> str:
    """Refuse a version beside the one in force; no other table is named, so that each can be rebuilt alone."""
    same = " AND ".join(f'held."{column}" IS NEW."{column}"' for column in record)
    words = f"one version of this {' and '.join(record)} is in force; supersede it"
    later = f'SELECT 1 FROM "{table}" AS later WHERE later."supersedes" = held."id"'
    beside = (
        f'{_refuse(table, words)} WHERE EXISTS (SELECT 1 FROM "{table}" AS held WHERE {same} '
        f'AND held."id" IS NOT NEW."supersedes" AND NOT EXISTS ({later}));'
    )
    owner = record[0]
    other = (
        f"{_refuse(table, f'it supersedes a row of another {owner}')} WHERE EXISTS (SELECT 1 FROM "
        f'"{table}" AS held WHERE held."id" = NEW."supersedes" AND held."{owner}" IS NOT NEW."{owner}");'
    )
    return f"{beside} {other}"


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
