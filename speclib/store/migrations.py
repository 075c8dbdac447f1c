"""Schema migrations: named, numbered functions; each runs in one transaction with the record that it ran."""

from __future__ import annotations

import sqlite3
from collections.abc import Callable

from speclib.store.schema import APPLICATION_ID, SCHEMA_VERSION, create_tables_sql, trigger_statements

Migration = Callable[[sqlite3.Connection], None]


def m0001_version_one_tables(connection: sqlite3.Connection) -> None:
    """All tables of version 1."""
    for statement in _statements(create_tables_sql()):
        connection.execute(statement)


MIGRATIONS: list[Migration] = [m0001_version_one_tables]
"""In order; the schema version of a library is the number of migrations it has seen."""


def _statements(script: str) -> list[str]:
    # executescript would commit half a schema: statements run one by one inside the migration's transaction.
    return [part for part in (piece.strip() for piece in script.split(";")) if part]


def migrate(connection: sqlite3.Connection) -> None:
    """Bring an open library file to the newest schema, through sqlite-utils; triggers are made anew after every
    migration.

    All pending migrations, the triggers and the version number are one transaction: a crash leaves the old schema
    whole.
    """
    from sqlite_utils import Database
    from sqlite_utils.migrations import Migrations

    database = Database(connection, execute_plugins=False)
    plan = Migrations("speclib")
    for migration in MIGRATIONS:
        plan(name=migration.__name__)(_on_connection(migration))
    with database.atomic():
        for name in _trigger_names(connection):
            connection.execute(f"DROP TRIGGER {name}")
        plan.apply(database)
        for statement in trigger_statements():
            connection.execute(statement)
        connection.execute(f"PRAGMA application_id = {APPLICATION_ID}")
        connection.execute(f"PRAGMA user_version = {max(SCHEMA_VERSION, len(MIGRATIONS))}")


def _on_connection(migration: Migration) -> Callable[[object], None]:
    def run(database: object) -> None:
        migration(database.conn)  # type: ignore[attr-defined]

    return run


def _trigger_names(connection: sqlite3.Connection) -> list[str]:
    rows = connection.execute("SELECT name FROM sqlite_master WHERE type = 'trigger'")
    return [name for (name,) in rows]
