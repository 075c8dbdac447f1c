"""Results of search and carry: frozen records that command line, page, report and Python share."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from speclib.model.assignment import Parity, Route
from speclib.model.compound import Compound
from speclib.model.entry import Status

RESULT_SCHEMA = 1
"""Schema number of the JSON documents; counts up when a key changes its meaning."""


def rounded(value: float | None, digits: int = 4) -> float | None:
    """A number for JSON: rounded, or None."""
    return None if value is None else round(float(value), digits)


@dataclass(frozen=True)
class Estimate:
    """A molecular mass or formula with where it comes from; `alternatives` are (value, support or None), best first.

    `inferred` says that the program worked it out; otherwise a person gave it or the library holds it.
    """

    value: int | float | str | None
    origin: str
    alternatives: tuple[tuple[int | float | str, float | None], ...] = ()
    inferred: bool = False

    def to_json(self) -> dict[str, Any]:
        """The estimate as plain values."""
        return {
            "value": self.value,
            "origin": self.origin,
            "alternatives": [{"value": v, "support": rounded(s)} for v, s in self.alternatives],
        }


@dataclass(frozen=True)
class Query:
    """The spectrum that was asked about: a file that was read, or a stored spectrum."""

    label: str
    spectrum_id: int | None
    file: str | None
    index: int
    peak_count: int
    base_peak_mz: float
    mz_from: float | None
    mz_to: float | None

    def to_json(self) -> dict[str, Any]:
        """The query as plain values."""
        return {
            "label": self.label,
            "spectrum_id": self.spectrum_id,
            "file": self.file,
            "index": self.index,
            "peak_count": self.peak_count,
            "base_peak_mz": self.base_peak_mz,
            "mz_from": self.mz_from,
            "mz_to": self.mz_to,
        }


@dataclass(frozen=True)
class Neighbour:
    """A reference near the query, led by what disagrees. `pairs` are (m/z query, m/z reference, shifted)."""

    rank: int
    spectrum_id: int
    spectrum_uid: str
    status: Status
    compound: Compound
    similarity: float
    reverse_similarity: float
    matched_peaks: int
    mass_difference: int | float | None
    ri_difference: float | None
    disagreements: tuple[str, ...]
    pairs: tuple[tuple[float, float, bool], ...] = ()
    probability: float | None = None
    set: int | None = None

    def to_json(self) -> dict[str, Any]:
        """The neighbour as plain values; pairs stay inside."""
        return {
            "rank": self.rank,
            "set": self.set,
            "spectrum_id": self.spectrum_id,
            "status": self.status.value,
            "compound": self.compound.short_json(),
            "similarity": rounded(self.similarity, 6),
            "reverse_similarity": rounded(self.reverse_similarity, 6),
            "matched_peaks": self.matched_peaks,
            "mass_difference": self.mass_difference,
            "ri_difference": rounded(self.ri_difference, 2),
            "probability": self.probability,
            "disagreements": list(self.disagreements),
        }


NO_PRESENCE = {
    "probability": None,
    "basis": None,
    "reason": "not computed: no reliability has been fitted on this library",
}
"""The answer to 'is it in the library at all?' as long as nothing has been fitted."""


@dataclass(frozen=True)
class SearchResult:
    """Neighbours of one query under one measure, with the library state they were found in."""

    query: Query
    measure: str
    weighting: str
    reverse: bool
    library_state: str
    searched: int
    neighbours: tuple[Neighbour, ...]
    molecular_mass: Estimate
    molecular_formula: Estimate
    remarks: tuple[str, ...] = ()

    def to_json(self) -> dict[str, Any]:
        """The result as plain values (DESIGN section 8)."""
        return {
            "schema": RESULT_SCHEMA,
            "query": self.query.to_json(),
            "measure": self.measure,
            "weighting": self.weighting,
            "ranked_by": "reverse_similarity" if self.reverse else "similarity",
            "library_state": self.library_state,
            "release": None,
            "searched": self.searched,
            "neighbours": [n.to_json() for n in self.neighbours],
            "presence": dict(NO_PRESENCE),
            "molecular_mass": self.molecular_mass.to_json(),
            "molecular_formula": self.molecular_formula.to_json(),
            "remarks": list(self.remarks),
        }


@dataclass(frozen=True)
class Check:
    """One check of a proposal: passed, failed, or None when it could not be made; the detail says it in words.

    `refuses` says that a failure refuses the proposal; other failures lower its confidence.
    """

    name: str
    passed: bool | None
    detail: str
    refuses: bool = False

    def to_json(self) -> dict[str, Any]:
        """The check as plain values."""
        return {"name": self.name, "passed": self.passed, "detail": self.detail, "refuses": self.refuses}


@dataclass(frozen=True)
class DonorVote:
    """One accepted assignment that speaks for a proposal; `weight` is its part in the vote."""

    assignment_id: int
    assignment_uid: str
    spectrum_id: int
    compound_name: str
    route: Route
    similarity: float
    weight: float

    def to_json(self) -> dict[str, Any]:
        """The vote as plain values."""
        return {
            "assignment_id": self.assignment_id,
            "spectrum_id": self.spectrum_id,
            "compound": self.compound_name,
            "route": self.route.value,
            "similarity": rounded(self.similarity),
            "weight": rounded(self.weight),
        }


@dataclass(frozen=True)
class Proposal:
    """An ion proposed for one peak of the unknown, with its argument.

    `peak` is the position in the unknown's arrays; `refused_by` names the check that failed, or is None.
    `neutral_loss` is None when the unknown's formula is not known.
    """

    peak: int
    mz: float
    formula: str
    neutral_loss: str | None
    mechanism: str
    parity: Parity
    route: Route
    donors: tuple[DonorVote, ...]
    checks: tuple[Check, ...]
    confidence: float | None
    confidence_basis: str
    reason: str
    refused_by: str | None = None
    id: int | None = None
    state: str = "proposed"
    rev: int | None = None

    def to_json(self) -> dict[str, Any]:
        """The proposal as plain values (DESIGN section 8)."""
        made: dict[str, Any] = {
            "id": self.id,
            "mz": self.mz,
            "formula": self.formula,
            "neutral_loss": self.neutral_loss,
            "mechanism": self.mechanism,
            "parity": self.parity.value,
            "route": self.route.value,
            "donors": [d.to_json() for d in self.donors],
            "checks": [c.to_json() for c in self.checks],
            "confidence": rounded(self.confidence),
            "confidence_basis": self.confidence_basis,
            "reason": self.reason,
            "state": self.state,
        }
        if self.refused_by is not None:
            made["refused_by"] = self.refused_by
        return made


@dataclass(frozen=True)
class Difference:
    """What the unknown has more (or less) than its nearest donor; formulas are signed texts, e.g. `+C2H4`."""

    mass: int | float | None
    formulas: tuple[str, ...] = ()
    interpretation: str | None = None
    atoms: tuple[int, ...] = ()

    def to_json(self) -> dict[str, Any]:
        """The difference as plain values."""
        return {
            "mass": self.mass,
            "formulas": list(self.formulas),
            "interpretation": self.interpretation,
            "atoms": list(self.atoms),
        }


@dataclass(frozen=True)
class CarryResult:
    """Everything that was carried to one unknown, and from whom."""

    unknown: Query
    library_state: str
    molecular_mass: Estimate
    molecular_formula: Estimate
    donors: tuple[Neighbour, ...]
    proposals: tuple[Proposal, ...]
    refused: tuple[Proposal, ...]
    difference: Difference
    remarks: tuple[str, ...] = ()
    case_id: int | None = None

    def to_json(self) -> dict[str, Any]:
        """The result as plain values (DESIGN section 8)."""
        return {
            "schema": RESULT_SCHEMA,
            "case_id": self.case_id,
            "unknown": self.unknown.to_json(),
            "library_state": self.library_state,
            "release": None,
            "molecular_mass": self.molecular_mass.to_json(),
            "molecular_formula": self.molecular_formula.to_json(),
            "donors": [d.to_json() for d in self.donors],
            "proposals": [p.to_json() for p in self.proposals],
            "refused": [p.to_json() for p in self.refused],
            "difference": self.difference.to_json(),
            "remarks": list(self.remarks),
        }
