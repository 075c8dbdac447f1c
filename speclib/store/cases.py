"""Cases: an unknown with its neighbours, proposals and decisions."""

from __future__ import annotations

import json
import sqlite3
from dataclasses import dataclass
from typing import Any

from speclib.errors import EntryNotFoundError
from speclib.model.assignment import AssignmentState, Parity, Route
from speclib.model.entry import LibrarySpectrum
from speclib.model.results import CarryResult, Check, DonorVote, Proposal, rounded
from speclib.store.assignments import insert_carried
from speclib.store.canonical import canonical_json
from speclib.store.flags import open_flags
from speclib.store.schema import LOCAL_IDS
from speclib.store.spectra import get_spectrum
from speclib.store.writing import WriteTransaction


@dataclass(frozen=True)
class CaseNeighbour:
    """A neighbour as it stood when the case was made."""

    rank: int
    spectrum_id: int
    compound_name: str
    similarity: float
    detail: dict[str, Any]

    def to_json(self) -> dict[str, Any]:
        """The neighbour as plain values."""
        return {
            "rank": self.rank,
            "spectrum_id": self.spectrum_id,
            "compound": self.compound_name,
            "similarity": rounded(self.similarity, 6),
            **self.detail,
        }


@dataclass(frozen=True)
class Case:
    """A stored case."""

    id: int
    uid: str
    status: str
    spectrum: LibrarySpectrum
    settings: dict[str, Any]
    library_state: str
    neighbours: tuple[CaseNeighbour, ...]
    proposals: tuple[Proposal, ...]
    refused: tuple[Proposal, ...]
    rev: int
    flags: tuple[dict[str, Any], ...] = ()

    def to_json(self) -> dict[str, Any]:
        """The case as plain values."""
        return {
            "schema": 1,
            "case_id": self.id,
            "uid": self.uid,
            "status": self.status,
            "resolution": None,
            "identification_level": None,
            "spectrum": self.spectrum.to_json(),
            "settings": self.settings,
            "library_state": self.library_state,
            "neighbours": [n.to_json() for n in self.neighbours],
            "proposals": [p.to_json() for p in self.proposals],
            "refused": [p.to_json() for p in self.refused],
            "flags": list(self.flags),
            "rev": self.rev,
        }


def insert_case(
    transaction: WriteTransaction,
    result: CarryResult,
    *,
    spectrum_id: int,
    settings: dict[str, Any],
    rules_version: int,
) -> int:
    """Store a carry result as an open case with neighbours, proposals, refused ones and lineage."""
    case_id = transaction.insert(
        "cases",
        spectrum_id=spectrum_id,
        status="open",
        settings=canonical_json(settings),
        library_state=result.library_state,
    )
    for neighbour in result.donors:
        detail = {
            "mass_difference": neighbour.mass_difference,
            "reverse_similarity": rounded(neighbour.reverse_similarity, 6),
            "matched_peaks": neighbour.matched_peaks,
            "disagreements": list(neighbour.disagreements),
        }
        transaction.insert(
            "case_neighbours",
            case_id=case_id,
            rank=neighbour.rank,
            spectrum_id=neighbour.spectrum_id,
            similarity=neighbour.similarity,
            detail=canonical_json(detail),
        )
    for proposal in (*result.proposals, *result.refused):
        insert_carried(transaction, proposal, spectrum_id=spectrum_id, case_id=case_id, rules_version=rules_version)
    return case_id


def open_cases_of(connection: sqlite3.Connection, spectrum_id: int) -> list[int]:
    """Numbers of the open cases of a spectrum."""
    rows = connection.execute(
        "SELECT id FROM cases WHERE spectrum_id = ? AND status = 'open' ORDER BY id", (spectrum_id,)
    )
    return [row["id"] for row in rows]


def list_cases(connection: sqlite3.Connection) -> list[dict[str, Any]]:
    """All cases in short: number, status, unknown and how far the decisions are."""
    rows = connection.execute(
        "SELECT c.id, c.status, c.spectrum_id, f.file_name, p.source_index, "
        "sum(a.state = 'proposed') AS open, sum(a.state = 'accepted') AS accepted, "
        "sum(a.state = 'rejected') AS rejected "
        "FROM cases c JOIN spectra p ON p.id = c.spectrum_id LEFT JOIN sources f ON f.id = p.source_id "
        "LEFT JOIN assignments a ON a.case_id = c.id GROUP BY c.id ORDER BY c.id"
    )
    return [
        {
            "case_id": r["id"],
            "status": r["status"],
            "spectrum_id": r["spectrum_id"],
            "file": r["file_name"],
            "index": r["source_index"],
            "undecided": r["open"] or 0,
            "accepted": r["accepted"] or 0,
            "rejected": r["rejected"] or 0,
        }
        for r in rows
    ]


def get_case(connection: sqlite3.Connection, case_id: int) -> Case:
    """A case with everything that belongs to it.

    Raises:
        EntryNotFoundError: there is no case of that number.
    """
    row = None
    if case_id in LOCAL_IDS:
        row = connection.execute("SELECT * FROM cases WHERE id = ?", (case_id,)).fetchone()
    if row is None:
        raise EntryNotFoundError(f"the library holds no case {case_id}", "see `speclib case list`")
    spectrum = get_spectrum(connection, row["spectrum_id"])
    proposals = _proposals(connection, case_id, spectrum)
    refused = AssignmentState.REFUSED.value
    return Case(
        row["id"],
        row["uid"],
        row["status"],
        spectrum,
        json.loads(row["settings"]),
        row["library_state"],
        tuple(_neighbours(connection, case_id)),
        tuple(p for p in proposals if p.state != refused),
        tuple(p for p in proposals if p.state == refused),
        row["rev"],
        tuple(open_flags(connection, row["uid"])),
    )


def _neighbours(connection: sqlite3.Connection, case_id: int) -> list[CaseNeighbour]:
    rows = connection.execute(
        "SELECT n.*, c.name FROM case_neighbours n JOIN spectra p ON p.id = n.spectrum_id "
        "JOIN compounds c ON c.id = p.compound_id WHERE n.case_id = ? ORDER BY n.rank",
        (case_id,),
    )
    return [
        CaseNeighbour(r["rank"], r["spectrum_id"], r["name"], r["similarity"], json.loads(r["detail"])) for r in rows
    ]


def _proposals(connection: sqlite3.Connection, case_id: int, spectrum: LibrarySpectrum) -> list[Proposal]:
    votes: dict[int, list[DonorVote]] = {}
    similarity = {
        r["compound_id"]: r["similarity"]
        for r in connection.execute(
            "SELECT p.compound_id, n.similarity FROM case_neighbours n JOIN spectra p ON p.id = n.spectrum_id "
            "WHERE n.case_id = ?",
            (case_id,),
        )
    }
    rows = connection.execute(
        "SELECT l.*, d.spectrum_id, p.compound_id, c.name FROM lineage l "
        "JOIN assignments a ON a.id = l.assignment_id "
        "LEFT JOIN assignments d ON d.id = l.donor_id LEFT JOIN spectra p ON p.id = d.spectrum_id "
        "LEFT JOIN compounds c ON c.id = p.compound_id WHERE a.case_id = ? ORDER BY l.weight DESC, l.donor_id",
        (case_id,),
    )
    for r in rows:
        vote = DonorVote(
            r["donor_id"],
            r["donor_uid"],
            r["spectrum_id"],
            r["name"],
            Route(r["route"]),
            similarity.get(r["compound_id"], 0.0),
            r["weight"],
        )
        votes.setdefault(r["assignment_id"], []).append(vote)
    found = connection.execute("SELECT * FROM assignments WHERE case_id = ? ORDER BY peak, id", (case_id,))
    return [_proposal(r, spectrum, tuple(votes.get(r["id"], ()))) for r in found]


def _proposal(row: sqlite3.Row, spectrum: LibrarySpectrum, votes: tuple[DonorVote, ...]) -> Proposal:
    checks = tuple(Check(c["name"], c["passed"], c["detail"], c["refuses"]) for c in json.loads(row["checks"]))
    refused = row["state"] == AssignmentState.REFUSED.value
    return Proposal(
        peak=row["peak"],
        mz=float(spectrum.spectrum.mz[row["peak"]]),
        formula=row["formula"],
        neutral_loss=row["neutral_loss"],
        mechanism=row["mechanism"],
        parity=Parity(row["parity"]),
        route=Route(row["route"]),
        donors=votes,
        checks=checks,
        confidence=row["confidence"],
        confidence_basis="prior" if row["calibration_id"] is None else "reliability",
        reason=row["reason"],
        refused_by=next((c.name for c in checks if c.passed is False and c.refuses), None) if refused else None,
        id=row["id"],
        state=row["state"],
        rev=row["rev"],
    )
