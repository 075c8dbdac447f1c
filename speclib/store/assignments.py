"""Assignments and their lineage: rows in, records out."""

from __future__ import annotations

import sqlite3
from collections.abc import Iterable

from speclib.model.assignment import Assignment, AssignmentOrigin, AssignmentState, Parity, Route
from speclib.model.results import Check, Proposal
from speclib.store.canonical import canonical_json
from speclib.store.writing import WriteTransaction


def _assignment(row: sqlite3.Row, mz: float) -> Assignment:
    return Assignment(
        id=row["id"],
        uid=row["uid"],
        spectrum_id=row["spectrum_id"],
        peak=row["peak"],
        mz=mz,
        formula=row["formula"],
        neutral_loss=row["neutral_loss"],
        mechanism=row["mechanism"],
        parity=Parity(row["parity"]),
        origin=AssignmentOrigin(row["origin"]),
        state=AssignmentState(row["state"]),
        reason=row["reason"],
        isotope_of=row["isotope_of"],
        accepted_how=row["accepted_how"],
        case_id=row["case_id"],
        route=Route(row["route"]) if row["route"] else None,
        confidence=row["confidence"],
        rules_version=row["rules_version"],
        rev=row["rev"],
    )


def _peak_mz(row: sqlite3.Row) -> float:
    import struct

    return float(struct.unpack_from("<d", row["mz"], 8 * row["peak"])[0])


def assignments_of(
    connection: sqlite3.Connection, spectrum_id: int, states: Iterable[AssignmentState] | None = None
) -> list[Assignment]:
    """Assignments of a spectrum by peak, then id; all states unless some are named."""
    return _select(connection, "a.spectrum_id = ?", (spectrum_id,), states)


def accepted_assignments(connection: sqlite3.Connection, compound_id: int) -> list[Assignment]:
    """Accepted assignments of all references of a compound that are not withdrawn, by spectrum, peak, id."""
    return _select(
        connection,
        "p.compound_id = ? AND p.role = 'reference' AND p.status <> 'withdrawn'",
        (compound_id,),
        (AssignmentState.ACCEPTED,),
    )


def spectrum_of_assignment(connection: sqlite3.Connection, assignment_id: int) -> int | None:
    """Number of the spectrum that an assignment belongs to, or None when there is no such assignment."""
    row = connection.execute("SELECT spectrum_id FROM assignments WHERE id = ?", (assignment_id,)).fetchone()
    return int(row["spectrum_id"]) if row else None


def donor_assignments(connection: sqlite3.Connection, compound_id: int) -> list[Assignment]:
    """Accepted assignments of a compound that can be carried: those that were not carried themselves.

    A carried assignment is no independent evidence: it would vote for what it came from.
    """
    accepted = accepted_assignments(connection, compound_id)
    return [a for a in accepted if a.origin is not AssignmentOrigin.CARRIED]


def compounds_with_donor_assignments(connection: sqlite3.Connection) -> set[int]:
    """Ids of the compounds that have at least one assignment to carry."""
    rows = connection.execute(
        "SELECT DISTINCT p.compound_id FROM assignments a JOIN spectra p ON p.id = a.spectrum_id "
        "WHERE a.state = 'accepted' AND a.origin <> 'carried' AND p.role = 'reference' AND p.status <> 'withdrawn'"
    )
    return {row[0] for row in rows}


def _select(
    connection: sqlite3.Connection,
    where: str,
    values: tuple[object, ...],
    states: Iterable[AssignmentState] | None,
) -> list[Assignment]:
    wanted = [s.value for s in (states if states is not None else AssignmentState)]
    rows = connection.execute(
        "SELECT a.*, p.mz FROM assignments a JOIN spectra p ON p.id = a.spectrum_id "  # noqa: S608 (own conditions)
        f"WHERE {where} AND a.state IN ({', '.join('?' * len(wanted))}) "
        "ORDER BY a.spectrum_id, a.peak, a.id",
        (*values, *wanted),
    )
    return [_assignment(row, _peak_mz(row)) for row in rows]


def insert_manual(
    transaction: WriteTransaction,
    *,
    spectrum_id: int,
    structure_id: int | None,
    peak: int,
    formula: str,
    neutral_loss: str,
    mechanism: str,
    parity: Parity,
    note: str,
) -> int:
    """Record an assignment made by hand: accepted at once, individually."""
    return transaction.insert(
        "assignments",
        spectrum_id=spectrum_id,
        peak=peak,
        structure_id=structure_id,
        formula=formula,
        neutral_loss=neutral_loss,
        mechanism=mechanism,
        parity=parity.value,
        atoms="[]",
        steps="[]",
        origin=AssignmentOrigin.MANUAL.value,
        state=AssignmentState.ACCEPTED.value,
        accepted_how="individually",
        rules_version=0,
        checks="[]",
        reason=note,
    )


def insert_carried(
    transaction: WriteTransaction, proposal: Proposal, *, spectrum_id: int, case_id: int, rules_version: int
) -> int:
    """Record a carried proposal (or a refused one) of a case with its checks and its lineage."""
    refused = proposal.refused_by is not None
    assignment_id = transaction.insert(
        "assignments",
        spectrum_id=spectrum_id,
        peak=proposal.peak,
        case_id=case_id,
        formula=proposal.formula,
        neutral_loss=proposal.neutral_loss,
        mechanism=proposal.mechanism,
        parity=proposal.parity.value,
        atoms="[]",
        steps="[]",
        origin=AssignmentOrigin.CARRIED.value,
        state=(AssignmentState.REFUSED if refused else AssignmentState.PROPOSED).value,
        route=proposal.route.value,
        confidence=proposal.confidence,
        rules_version=rules_version,
        checks=canonical_json([_check_json(check) for check in proposal.checks]),
        reason=proposal.reason,
    )
    for vote in proposal.donors:
        transaction.insert(
            "lineage",
            assignment_id=assignment_id,
            donor_uid=vote.assignment_uid,
            donor_id=vote.assignment_id,
            route=vote.route.value,
            weight=vote.weight,
        )
    return assignment_id


def _check_json(check: Check) -> dict[str, object]:
    return dict(check.to_json())
