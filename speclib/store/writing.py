"""The one write path: a transaction that carries its own event.

`writing()` takes the write lock at once (BEGIN IMMEDIATE), so that two writers queue instead of failing half-way; rows
go in through `insert` and `update`, which note what changed; the event is written last and everything commits
together.
"""

from __future__ import annotations

import secrets
import sqlite3
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

from speclib.clock import Clock, utc_text
from speclib.errors import EntryNotFoundError, InvalidValueError, LibraryError, RefusedError
from speclib.store.connection import explained_errors
from speclib.store.schema import TABLES
from speclib.store.trail import FIRST_PREVIOUS_HASH, Change, Event, RowKeys, write_event

UidSource = Callable[[], str]


def random_uid() -> str:
    """A new global key: 128 random bits in hexadecimal."""
    return secrets.token_hex(16)


class WriteTransaction:
    """What may be done inside `writing()`. Rows are never deleted."""

    def __init__(self, connection: sqlite3.Connection, event_id: int, new_uid: UidSource, keys: RowKeys) -> None:
        self.connection = connection
        self.event_id = event_id
        self.detail: dict[str, Any] = {}
        self._new_uid = new_uid
        self._keys = keys
        self._first_before: dict[tuple[str, int], str | None] = {}
        self._ended = False
        self.abandoned = False

    def end(self) -> None:
        """Accept no more changes: `writing` is done with this transaction."""
        self._ended = True

    def require_open(self) -> None:
        """Refuse a change that no event would cover: after the block, or after SQLite rolled back by itself.

        Raises:
            LibraryError: the transaction is over.
        """
        if self._ended or not self.connection.in_transaction:
            raise LibraryError("a change came after the end of its transaction", "nothing of it was kept; try again")

    def abandon(self) -> None:
        """Leave the library as it was and write no event, because there turned out to be nothing to do."""
        self.abandoned = True

    @contextmanager
    def step(self) -> Iterator[None]:
        """A part that can fail alone: what it wrote is undone, the rest of the transaction goes on."""
        self.require_open()
        before = dict(self._first_before)
        self.connection.execute("SAVEPOINT step")
        try:
            yield
        except BaseException:
            if self.connection.in_transaction:
                self.connection.execute("ROLLBACK TO step")
                self.connection.execute("RELEASE step")
            self._first_before = before
            self._keys.forget()
            raise
        self.connection.execute("RELEASE step")

    def insert(self, table: str, **values: Any) -> int:
        """Add a row and return its local id; a `uid` is made when the table has one.

        Raises:
            InvalidValueError: a text or a number that SQLite cannot hold.
        """
        spec = TABLES[table]
        if "uid" in spec.columns and "uid" not in values:
            values["uid"] = self._new_uid()
        names = ", ".join(values)
        marks = ", ".join("?" * len(values))
        cursor = self._execute(
            f"INSERT INTO {table} ({names}) VALUES ({marks})",  # noqa: S608 (names from our own schema)
            tuple(values.values()),
        )
        row_id = int(cursor.lastrowid or 0)
        self._first_before[table, row_id] = None
        return row_id

    def update(self, table: str, row_id: int, *, expected_rev: int | None = None, **values: Any) -> None:
        """Change columns of a row; `rev` counts up where the table has one. The columns of a row key never change.

        Raises:
            EntryNotFoundError: there is no such row.
            RefusedError: `expected_rev` is given and somebody else changed the row since it was read.
            InvalidValueError: a text or a number that SQLite cannot hold.
            ValueError: the table has no `rev` to compare with `expected_rev`, or a column belongs to the row key.
        """
        self.require_open()
        spec = TABLES[table]
        if not values.keys().isdisjoint({"id", *spec.key}):
            raise ValueError(f"the trail knows rows of {table} by {', '.join(spec.key)}: these never change")
        if expected_rev is not None and "rev" not in spec.columns:
            raise ValueError(f"rows of {table} have no rev")
        row = self.connection.execute(f"SELECT * FROM {table} WHERE id = ?", (row_id,)).fetchone()  # noqa: S608
        if row is None:
            raise EntryNotFoundError(f"the library holds no row {row_id} of {table}")
        if "rev" in spec.columns:
            if expected_rev is not None and row["rev"] != expected_rev:
                raise RefusedError(
                    f"row {row_id} of {table} was changed by somebody else meanwhile",
                    "look at it again, then decide",
                )
            values["rev"] = row["rev"] + 1
        self._first_before.setdefault((table, row_id), self._keys.record(table, row))
        assignments = ", ".join(f"{name} = ?" for name in values)
        self._execute(
            f"UPDATE {table} SET {assignments} WHERE id = ?",  # noqa: S608 (names from our own schema)
            (*values.values(), row_id),
        )

    def _execute(self, statement: str, values: tuple[Any, ...]) -> sqlite3.Cursor:
        self.require_open()
        with _storable():
            return self.connection.execute(statement, values)

    def changes(self) -> list[Change]:
        """The rows touched so far, in order of first touch, with their records before and now."""
        made = []
        for (table, row_id), before in self._first_before.items():
            row = self.connection.execute(f"SELECT * FROM {table} WHERE id = ?", (row_id,)).fetchone()  # noqa: S608
            made.append(Change(table, self._keys.of_row(table, row), before, self._keys.record(table, row)))
        return made


@contextmanager
def _storable() -> Iterator[None]:
    """Name a value that SQLite cannot hold."""
    try:
        yield
    except UnicodeEncodeError as error:
        raise InvalidValueError(
            f"the text {error.object[:60]!a} is not valid Unicode and cannot be stored",
            "rename the file or correct the text",
        ) from error
    except OverflowError as error:
        raise InvalidValueError("a whole number is too large to be stored", "correct the number") from error


@contextmanager
def writing(
    connection: sqlite3.Connection,
    path: Path,
    *,
    action: str,
    analyst: str | None,
    clock: Clock,
    reason: str | None = None,
    new_uid: UidSource = random_uid,
) -> Iterator[WriteTransaction]:
    """Run a block as one transaction with one event; whatever raises inside leaves the library as it was.

    The event's `detail` is what the block leaves in `transaction.detail`.

    Raises:
        LibraryError: locked by another writer, read-only, disk full, or a constraint says no.
    """
    with explained_errors(path):
        connection.execute("BEGIN IMMEDIATE")
    transaction: WriteTransaction | None = None
    try:
        with explained_errors(path):
            last = connection.execute(
                "SELECT seq, hash FROM events WHERE library_uid = (SELECT uid FROM library) ORDER BY seq DESC LIMIT 1"
            ).fetchone()
            event_id = connection.execute("SELECT ifnull(max(id), 0) + 1 FROM events").fetchone()[0]
        keys = RowKeys(connection)
        transaction = WriteTransaction(connection, event_id, new_uid, keys)
        seq = last["seq"] + 1 if last else 1
        library = connection.execute("SELECT uid FROM library").fetchone()
        if library:
            keys.remember_event(event_id, library["uid"], seq)
        with explained_errors(path):
            yield transaction
            transaction.require_open()
            if transaction.abandoned:
                connection.execute("ROLLBACK")
                return
            uid = connection.execute("SELECT uid FROM library").fetchone()["uid"]
            event = Event(
                event_id,
                uid,
                seq,
                utc_text(clock()),
                analyst,
                action,
                reason,
                transaction.detail,
                last["hash"] if last else FIRST_PREVIOUS_HASH,
                "",
            )
            with _storable():
                write_event(connection, event, transaction.changes())
            connection.execute("COMMIT")
    except BaseException:
        if connection.in_transaction:
            connection.execute("ROLLBACK")
        raise
    finally:
        if transaction is not None:
            transaction.end()
