"""Flags: what rests on something that was later taken back, until somebody has looked at it."""

from __future__ import annotations

import json
import sqlite3
from collections.abc import Iterable
from typing import Any

from speclib.store.writing import WriteTransaction


def flag_dependent_cases(
    transaction: WriteTransaction,
    cause_uid: str,
    assignment_ids: Iterable[int],
    reason: str,
    *,
    spectrum_id: int | None = None,
) -> list[int]:
    """Flag, once each, the cases that rest on something taken back, and return their numbers.

    A case rests on an assignment that speaks for one of its live proposals, and on a spectrum (`spectrum_id`) that is
    one of its neighbours. The revision of a flagged case counts up, so that a reviewer who has not seen it is told.
    """
    rows = transaction.connection.execute(
        "SELECT c.id, c.uid FROM cases c WHERE EXISTS ("
        "SELECT 1 FROM lineage l JOIN assignments a ON a.id = l.assignment_id WHERE a.case_id = c.id "
        "AND a.state IN ('proposed', 'accepted') AND l.donor_id IN (SELECT value FROM json_each(?1))) "
        "OR EXISTS (SELECT 1 FROM case_neighbours n WHERE n.case_id = c.id AND n.spectrum_id = ?2) ORDER BY c.id",
        (json.dumps(sorted(set(assignment_ids))), spectrum_id),
    ).fetchall()
    for row in rows:
        transaction.insert(
            "flags", subject_uid=row["uid"], cause_uid=cause_uid, reason=reason, opened_event=transaction.event_id
        )
        transaction.update("cases", row["id"])
    return [row["id"] for row in rows]


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
