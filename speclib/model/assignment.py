"""Assignments: what a peak is, why, and who says so."""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum
from typing import Any


class AssignmentOrigin(StrEnum):
    """Where an assignment comes from."""

    MANUAL = "manual"
    EXPLAINED = "explained"
    CARRIED = "carried"


class AssignmentState(StrEnum):
    """Where an assignment stands."""

    PROPOSED = "proposed"
    REFUSED = "refused"
    ACCEPTED = "accepted"
    REJECTED = "rejected"
    SUPERSEDED = "superseded"


class Parity(StrEnum):
    """Electron parity of an ion."""

    OE = "OE"
    EE = "EE"


class Route(StrEnum):
    """How an assignment was carried from its donor."""

    SAME_ION = "same-ion"
    SAME_LOSS = "same-loss"
    PART_SHIFT = "part-shift"


@dataclass(frozen=True)
class Assignment:
    """A peak of a stored spectrum and the ion it is taken for.

    `peak` is the position in the spectrum's arrays, `mz` the m/z there. Formulas are in Hill order without charge;
    `neutral_loss` is "" for the molecular ion, None when the molecule is not known. `accepted_how` is
    `individually`, `by rule` or None.
    """

    id: int
    uid: str
    spectrum_id: int
    peak: int
    mz: float
    formula: str
    neutral_loss: str | None
    mechanism: str
    parity: Parity
    origin: AssignmentOrigin
    state: AssignmentState
    reason: str = ""
    isotope_of: int | None = None
    accepted_how: str | None = None
    case_id: int | None = None
    route: Route | None = None
    confidence: float | None = None
    rules_version: int = 0
    rev: int = 1

    def to_json(self) -> dict[str, Any]:
        """The assignment as plain values."""
        return {
            "id": self.id,
            "uid": self.uid,
            "spectrum_id": self.spectrum_id,
            "mz": self.mz,
            "formula": self.formula,
            "neutral_loss": self.neutral_loss,
            "mechanism": self.mechanism,
            "parity": self.parity.value,
            "origin": self.origin.value,
            "state": self.state.value,
            "accepted_how": self.accepted_how,
            "isotope_of": self.isotope_of,
            "route": self.route.value if self.route else None,
            "confidence": self.confidence,
            "reason": self.reason,
            "rev": self.rev,
        }
