"""The audit trail: row keys, row records and the hash chain of events."""

from __future__ import annotations

import json
import sqlite3
from dataclasses import dataclass, replace
from typing import Any

from speclib.store.canonical import CANONICAL_VERSION, canonical_json, sha256_hex
from speclib.store.schema import TABLES, Table

FIRST_PREVIOUS_HASH = "0" * 64


@dataclass(frozen=True)
class Change:
    """What an event did to one row; `before` is None for a new row."""

    table: str
    row_uid: str
    before: str | None
    after: str | None


@dataclass(frozen=True)
class Event:
    """One line of the trail, as stored."""

    id: int
    library_uid: str
    seq: int
    at: str
    analyst: str | None
    action: str
    reason: str | None
    detail: dict[str, Any]
    previous_hash: str
    hash: str

    def to_json(self) -> dict[str, Any]:
        """The event as plain values."""
        return {
            "seq": self.seq,
            "at": self.at,
            "analyst": self.analyst,
            "action": self.action,
            "reason": self.reason,
            "detail": self.detail,
            "previous_hash": self.previous_hash,
            "hash": self.hash,
            "library_uid": self.library_uid,
        }


def event_hash(event: Event, changes: list[Change]) -> str:
    """Hash of an event: its fields, its changes and the hash before it, as canonical JSON."""
    return sha256_hex(
        canonical_json(
            {
                "canonical": CANONICAL_VERSION,
                "library_uid": event.library_uid,
                "seq": event.seq,
                "at": event.at,
                "analyst": event.analyst,
                "action": event.action,
                "reason": event.reason,
                "detail": event.detail,
                "previous_hash": event.previous_hash,
                "changes": [[c.table, c.row_uid, c.before, c.after] for c in changes],
            }
        )
    )


def event_from_row(row: sqlite3.Row) -> Event:
    """Read an event row."""
    return Event(
        row["id"],
        row["library_uid"],
        row["seq"],
        row["at"],
        row["analyst"],
        row["action"],
        row["reason"],
        json.loads(row["detail"]),
        row["previous_hash"],
        row["hash"],
    )


def write_event(connection: sqlite3.Connection, event: Event, changes: list[Change]) -> None:
    """Add an event with its changes; its hash is computed here.

    The detail is hashed as it will be read back, so that a key that is no text cannot change the order of the hashed
    form.
    """
    event = replace(event, detail=json.loads(canonical_json(event.detail)))
    connection.execute(
        "INSERT INTO events (id, library_uid, seq, at, analyst, action, reason, detail, previous_hash, hash) "
        "VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?)",
        (
            event.id,
            event.library_uid,
            event.seq,
            event.at,
            event.analyst,
            event.action,
            event.reason,
            canonical_json(event.detail),
            event.previous_hash,
            event_hash(event, changes),
        ),
    )
    connection.executemany(
        "INSERT INTO event_changes (event_id, table_name, row_uid, before, after) VALUES (?, ?, ?, ?, ?)",
        [(event.id, c.table, c.row_uid, c.before, c.after) for c in changes],
    )


def library_state(connection: sqlite3.Connection) -> str:
    """Hash of the library's newest own event: the state that every result cites ("" before the first event)."""
    row = connection.execute(
        "SELECT hash FROM events WHERE library_uid = (SELECT uid FROM library) ORDER BY seq DESC LIMIT 1"
    ).fetchone()
    return str(row["hash"]) if row else ""


class RowKeys:
    """Row keys by table and local id, looked up once and remembered."""

    def __init__(self, connection: sqlite3.Connection) -> None:
        self._connection = connection
        self._known: dict[tuple[str, int], str] = {}
        self._coming: dict[tuple[str, int], str] = {}
        self._columns: dict[str, tuple[str, ...]] = {}

    def remember_event(self, event_id: int, library_uid: str, seq: int) -> None:
        """Tell the key of an event that is not written yet."""
        self._coming["events", event_id] = f"{library_uid}|{seq}"

    def forget(self) -> None:
        """Forget rows that were undone: their local ids can be given again."""
        self._known.clear()

    def of(self, table: str, row_id: int) -> str:
        """The key of a row by its local id."""
        if (table, row_id) in self._coming:
            return self._coming[table, row_id]
        if (table, row_id) not in self._known:
            row = self._connection.execute(f"SELECT * FROM {table} WHERE id = ?", (row_id,)).fetchone()  # noqa: S608
            # Only a damaged or tampered library has no such row; verification names it instead of failing.
            self._known[table, row_id] = f"missing:{table}:{row_id}" if row is None else self.of_row(table, row)
        return self._known[table, row_id]

    def of_row(self, table: str, row: sqlite3.Row) -> str:
        """The key of a row at hand."""
        if table == "events":
            return f"{row['library_uid']}|{row['seq']}"
        spec = TABLES[table]
        return "|".join(self._part(spec, column, row[column]) for column in spec.key)

    def _part(self, spec: Table, column: str, value: Any) -> str:
        return self.of(spec.references[column], value) if column in spec.references else str(value)

    def record(self, table: str, row: sqlite3.Row) -> str:
        """Canonical record of a row: local ids replaced by keys, blobs by their SHA-256."""
        spec = TABLES[table]
        if table not in self._columns:
            # A library of an older schema lacks some columns of today.
            held = set(row.keys())
            self._columns[table] = tuple(c for c in spec.columns if c in held and c != "id")
        values: dict[str, Any] = {column: row[column] for column in self._columns[table]}
        for column, target in spec.references.items():
            if values.get(column) is not None:
                values[column] = self.of(target, values[column])
        for column, value in values.items():
            if isinstance(value, bytes):
                values[column] = f"sha256:{sha256_hex(value)}"
        return canonical_json(values)
