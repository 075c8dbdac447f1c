"""Verification: hashes of peaks, the chain of events, and the replay of every event against the rows."""

from __future__ import annotations

import sqlite3
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from speclib.progress import SILENT, Progress
from speclib.store.canonical import sha256_hex
from speclib.store.schema import TABLES, trigger_names
from speclib.store.trail import (
    FIRST_PREVIOUS_HASH,
    Change,
    Event,
    RowKeys,
    event_from_row,
    event_hash,
    library_state,
)


@dataclass(frozen=True)
class Verification:
    """Outcome: how much was checked, the chain's head, and the first difference of every kind found."""

    spectra: int
    events: int
    rows: int
    chain_head: str
    differences: tuple[str, ...]

    @property
    def intact(self) -> bool:
        """Whether nothing differs."""
        return not self.differences

    def to_json(self) -> dict[str, Any]:
        """The outcome as plain values."""
        return {
            "schema": 1,
            "intact": self.intact,
            "spectra": self.spectra,
            "events": self.events,
            "rows": self.rows,
            "chain_head": self.chain_head,
            "differences": list(self.differences),
        }


def verify_library(connection: sqlite3.Connection, progress: Progress = SILENT) -> Verification:
    """Recompute everything that the library claims of itself; call inside one read transaction.

    Five parts, each reporting its first difference: SQLite's own integrity check, the triggers that guard the rows,
    peak hashes, event chain, replay.
    """
    parts = (_sqlite_differences, _guard_differences, _peak_differences, _chain_differences, _replay_differences)
    found: list[str] = []
    progress.start("verify", len(parts))
    try:
        for part in parts:
            found.extend(first for first in [next(part(connection), None)] if first is not None)
            progress.advance()
    finally:
        progress.finish()
    head = library_state(connection)
    counts = [connection.execute(f"SELECT count(*) FROM {t}").fetchone()[0] for t in ("spectra", "events")]  # noqa: S608
    rows = sum(connection.execute(f"SELECT count(*) FROM {t}").fetchone()[0] for t in TABLES)  # noqa: S608
    return Verification(counts[0], counts[1], rows, head, tuple(found))


def _sqlite_differences(connection: sqlite3.Connection) -> Iterator[str]:
    # SQLite takes what is missing of the last page for zeros.
    pages, size = (connection.execute(f"PRAGMA {name}").fetchone()[0] for name in ("page_count", "page_size"))
    file = connection.execute("SELECT file FROM pragma_database_list WHERE name = 'main'").fetchone()[0]
    missing = pages * size - Path(file).stat().st_size if file else 0
    if missing > 0:
        yield f"the file is {missing} bytes too short"
    for (line,) in connection.execute("PRAGMA integrity_check(1)"):
        if line != "ok":
            yield f"SQLite's integrity check: {line}"
    for row in connection.execute("PRAGMA foreign_key_check"):
        yield f"a row of {row[0]} points to a row of {row[2]} that is missing"


def _guard_differences(connection: sqlite3.Connection) -> Iterator[str]:
    held = {name for (name,) in connection.execute("SELECT name FROM sqlite_master WHERE type = 'trigger'")}
    for name in trigger_names():
        if name not in held:
            yield f"the guard {name} is missing from the library"


def _peak_differences(connection: sqlite3.Connection) -> Iterator[str]:
    for row in connection.execute("SELECT id, mz, intensity, content_hash FROM spectra ORDER BY id"):
        if sha256_hex(bytes(row["mz"]) + bytes(row["intensity"])) != row["content_hash"]:
            yield f"the peaks of spectrum {row['id']} do not give the hash recorded for them"


def _chain_differences(connection: sqlite3.Connection) -> Iterator[str]:
    # Chains are per origin library: after a merge several stand here, each whole.
    ends: dict[str, tuple[str, int]] = {}
    for row in connection.execute("SELECT * FROM events ORDER BY id"):
        try:
            event = event_from_row(row)
        except ValueError:
            yield f"event {row['seq']} ({row['action']}, {row['at']}) has a detail that is no JSON"
            return
        previous, expected_seq = ends.get(event.library_uid, (FIRST_PREVIOUS_HASH, 1))
        name = f"event {event.seq} ({event.action}, {event.at})"
        if event.seq > expected_seq:
            yield f"event {expected_seq} is missing before {name}"
        if event.seq < expected_seq:
            yield f"{name} stands after an event that came later"
        if event.previous_hash != previous:
            yield f"{name} does not follow the event before it"
        if _hash(event, _changes_of(connection, event.id)) != event.hash:
            yield f"{name} does not give the hash recorded for it"
        ends[event.library_uid] = (event.hash, event.seq + 1)


def _hash(event: Event, changes: list[Change]) -> str | None:
    try:
        return event_hash(event, changes)
    except ValueError:
        # An infinity, or text that is no Unicode: no event of ours has them.
        return None


def _record(keys: RowKeys, table: str, row: sqlite3.Row) -> str | None:
    try:
        return keys.record(table, row)
    except ValueError:
        return None


def _changes_of(connection: sqlite3.Connection, event_id: int) -> list[Change]:
    rows = connection.execute(
        "SELECT table_name, row_uid, before, after FROM event_changes WHERE event_id = ? ORDER BY id",
        (event_id,),
    )
    return [Change(*row) for row in rows]


def _replay_differences(connection: sqlite3.Connection) -> Iterator[str]:
    replayed: dict[tuple[str, str], str] = {}
    query = (
        "SELECT e.seq, c.table_name, c.row_uid, c.before, c.after FROM event_changes c "
        "JOIN events e ON e.id = c.event_id ORDER BY c.id"
    )
    for row in connection.execute(query):
        place = (row["table_name"], row["row_uid"])
        if replayed.get(place) != row["before"]:
            yield f"event {row['seq']} starts from another state of {place[0]} {place[1]} than the one before it left"
        if row["after"] is None:
            replayed.pop(place, None)
        else:
            replayed[place] = row["after"]
    keys = RowKeys(connection)
    for table in TABLES:
        for row in connection.execute(f"SELECT * FROM {table} ORDER BY id"):  # noqa: S608
            key = keys.of_row(table, row)
            if (table, key) not in replayed:
                yield f"row {row['id']} of {table} stands in the library but no event made it"
            elif replayed.pop((table, key)) != _record(keys, table, row):
                yield f"row {row['id']} of {table} is not what the events say"
    for table, key in replayed:
        yield f"the events made a row of {table} ({key}) that is not in the library"
