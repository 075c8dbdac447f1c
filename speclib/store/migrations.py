"""Schema migrations: named, numbered functions; all that are pending run in one transaction with the record that they
ran.
"""

from __future__ import annotations

import sqlite3
from collections.abc import Callable

from speclib.clock import Clock, system_clock, utc_text
from speclib.errors import LibraryError
from speclib.store.schema import APPLICATION_ID, SCHEMA_VERSION, TABLES, create_tables_sql, trigger_statements
from speclib.store.trail import FIRST_PREVIOUS_HASH, Change, Event, RowKeys, write_event

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


def schema_version(connection: sqlite3.Connection) -> int:
    """The schema version that the file says it has; 0 for a new file."""
    return int(connection.execute("PRAGMA user_version").fetchone()[0])


def migrate(
    connection: sqlite3.Connection,
    *,
    clock: Clock = system_clock,
    back_up: Callable[[], str | None] = lambda: None,
) -> None:
    """Bring an open library file to the newest schema, through sqlite-utils; triggers are made anew after every
    migration.

    All pending migrations, the triggers, the event and the version number are one transaction: a crash leaves the old
    schema whole. `back_up` is called under the write lock, before anything changes, and returns the backup's name.
    The event holds the new record of every row whose record the migration changed.

    Raises:
        LibraryError: rows would point to rows that do not exist.
    """
    # Tables that others point to cannot be rebuilt while foreign keys are on; they are checked before the commit.
    connection.execute("PRAGMA foreign_keys = OFF")
    try:
        connection.execute("BEGIN IMMEDIATE")
        try:
            old = schema_version(connection)
            if old < len(MIGRATIONS):
                backup = back_up()
                _migrate(connection, clock, {"from": old, "to": len(MIGRATIONS), "backup": backup})
            connection.execute("COMMIT")
        except BaseException:
            if connection.in_transaction:
                connection.execute("ROLLBACK")
            raise
    finally:
        connection.execute("PRAGMA foreign_keys = ON")


def _migrate(connection: sqlite3.Connection, clock: Clock, detail: dict[str, object]) -> None:
    from sqlite_utils import Database
    from sqlite_utils.migrations import Migrations

    before = _records(connection)
    for name in _trigger_names(connection):
        connection.execute(f"DROP TRIGGER {name}")
    plan = Migrations("speclib")
    for migration in MIGRATIONS:
        plan(name=migration.__name__)(_on_connection(migration))
    plan.apply(Database(connection, execute_plugins=False))
    for statement in trigger_statements():
        connection.execute(statement)
    dangling = connection.execute("PRAGMA foreign_key_check").fetchone()
    if dangling:
        raise LibraryError(
            f"in the new schema a row of {dangling[0]} would point to a row of {dangling[2]} that is missing",
            "the library was left as it was; go back to a backup",
        )
    _write_migration_event(connection, before, clock, detail)
    connection.execute(f"PRAGMA application_id = {APPLICATION_ID}")
    connection.execute(f"PRAGMA user_version = {max(SCHEMA_VERSION, len(MIGRATIONS))}")


def _records(connection: sqlite3.Connection) -> dict[tuple[str, int], tuple[str, str]]:
    """Row key and record of every audited row, by table and local id."""
    held = {name for (name,) in connection.execute("SELECT name FROM sqlite_master WHERE type = 'table'")}
    keys = RowKeys(connection)
    found: dict[tuple[str, int], tuple[str, str]] = {}
    for table in (name for name in TABLES if name in held):
        for row in connection.execute(f"SELECT * FROM {table} ORDER BY id"):  # noqa: S608 (names from our own schema)
            found[table, row["id"]] = (keys.of_row(table, row), keys.record(table, row))
    return found


def _write_migration_event(
    connection: sqlite3.Connection,
    before: dict[tuple[str, int], tuple[str, str]],
    clock: Clock,
    detail: dict[str, object],
) -> None:
    library = connection.execute("SELECT uid FROM library").fetchone()
    if library is None:
        return
    changes = []
    for place, (key, record) in _records(connection).items():
        old = before.get(place, (key, None))[1]
        if old != record:
            changes.append(Change(place[0], key, old, record))
    last = connection.execute(
        "SELECT seq, hash FROM events WHERE library_uid = ? ORDER BY seq DESC LIMIT 1", (library["uid"],)
    ).fetchone()
    event_id = connection.execute("SELECT ifnull(max(id), 0) + 1 FROM events").fetchone()[0]
    seq, previous = (last["seq"] + 1, last["hash"]) if last else (1, FIRST_PREVIOUS_HASH)
    event = Event(event_id, library["uid"], seq, utc_text(clock()), None, "migrate", None, dict(detail), previous, "")
    write_event(connection, event, changes)


def _on_connection(migration: Migration) -> Callable[[object], None]:
    def run(database: object) -> None:
        migration(database.conn)  # type: ignore[attr-defined]

    return run


def _trigger_names(connection: sqlite3.Connection) -> list[str]:
    rows = connection.execute("SELECT name FROM sqlite_master WHERE type = 'trigger'")
    return [name for (name,) in rows]
