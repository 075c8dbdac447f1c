"""Reading the trail: all events, or those that touched one row."""

from __future__ import annotations

import json
import sqlite3
from dataclasses import dataclass
from typing import Any

from speclib.store.canonical import canonical_json
from speclib.store.trail import Event, event_from_row


@dataclass(frozen=True)
class HistoryEntry:
    """An event and, when one row was asked for, how it changed that row."""

    event: Event
    changes: tuple[dict[str, Any], ...] = ()

    def to_json(self) -> dict[str, Any]:
        """The entry as plain values."""
        return {**self.event.to_json(), "changes": list(self.changes)}


def recent_events(connection: sqlite3.Connection, limit: int | None = None) -> list[HistoryEntry]:
    """Events, newest first."""
    rows = connection.execute("SELECT * FROM events ORDER BY id DESC LIMIT ?", (-1 if limit is None else limit,))
    return [HistoryEntry(event_from_row(row)) for row in rows]


def events_of_row(connection: sqlite3.Connection, row_uid: str) -> list[HistoryEntry]:
    """Events that touched a row or one that points to it (its assignments, say), newest first, with both records."""
    rows = connection.execute(
        "SELECT e.*, c.table_name, c.row_uid, c.before, c.after FROM event_changes c "
        "JOIN events e ON e.id = c.event_id "
        "WHERE c.row_uid = ?1 OR instr(c.after, ?2) > 0 OR instr(c.before, ?2) > 0 ORDER BY e.id DESC, c.id",
        (row_uid, canonical_json(row_uid)),
    ).fetchall()
    by_event: dict[int, tuple[Event, list[dict[str, Any]]]] = {}
    for row in rows:
        entry = by_event.setdefault(row["id"], (event_from_row(row), []))
        before, after = (json.loads(row[name]) if row[name] else None for name in ("before", "after"))
        entry[1].append({"table": row["table_name"], "row": row["row_uid"], "before": before, "after": after})
    return [HistoryEntry(event, tuple(changes)) for event, changes in by_event.values()]
