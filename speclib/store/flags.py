"""Flags: what rests on something that was later taken back, until somebody has looked at it."""

from __future__ import annotations

import json
import sqlite3
from collections.abc import Iterable
from typing import Any

from speclib.store.writing import WriteTransaction


def flag_dependent_cases(transaction: WriteTransaction, assignment_ids: Iterable[int], reason: str) -> list[int]:
    """Flag every case with a live proposal that one of these donor assignments speaks for; return the case numbers."""
    rows = transaction.connection.execute(
        "SELECT DISTINCT c.id, c.uid, l.donor_uid FROM lineage l JOIN assignments a ON a.id = l.assignment_id "
        "JOIN cases c ON c.id = a.case_id WHERE a.state IN ('proposed', 'accepted') "
        "AND l.donor_id IN (SELECT value FROM json_each(?)) ORDER BY c.id, l.donor_uid",
        (json.dumps(sorted(set(assignment_ids))),),
    ).fetchall()
    for row in rows:
        transaction.insert(
            "flags",
            subject_uid=row["uid"],
            cause_uid=row["donor_uid"],
            reason=reason,
            opened_event=transaction.event_id,
        )
    return sorted({row["id"] for row in rows})


def open_flags(connection: sqlite3.Connection, subject_uid: str) -> list[dict[str, Any]]:
    """Open flags of a row: number, cause, reason and when they were raised."""
    rows = connection.execute(
        "SELECT f.id, f.cause_uid, f.reason, e.at FROM flags f JOIN events e ON e.id = f.opened_event "
        "WHERE f.subject_uid = ? AND f.closed_event IS NULL ORDER BY f.id",
        (subject_uid,),
    )
    return [dict(row) for row in rows]


def close_flags(transaction: WriteTransaction, subject_uid: str) -> int:
    """Close the open flags of a row, because somebody has looked at what they say; return how many."""
    flags = open_flags(transaction.connection, subject_uid)
    for flag in flags:
        transaction.update("flags", flag["id"], closed_event=transaction.event_id)
    return len(flags)
