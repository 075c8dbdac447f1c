"""What an intake did with every spectrum and file it was given."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from speclib.model.finding import Finding


@dataclass(frozen=True)
class TakenSpectrum:
    """One spectrum that is in the library now; `already_held` when its peaks were there before."""

    file: str
    index: int
    spectrum_id: int
    compound_id: int | None
    status: str
    findings: tuple[Finding, ...]
    already_held: bool = False
    remark: str | None = None

    def to_json(self) -> dict[str, Any]:
        """The spectrum as plain values."""
        return {
            "file": self.file,
            "index": self.index,
            "spectrum_id": self.spectrum_id,
            "compound_id": self.compound_id,
            "status": self.status,
            "already_held": self.already_held,
            "remark": self.remark,
            "findings": [f.to_json() for f in self.findings],
        }


@dataclass(frozen=True)
class Skipped:
    """Something that was not taken in, why, and its line in a table if it stood in one."""

    file: str
    reason: str
    line: int | None = None

    def to_json(self) -> dict[str, Any]:
        """The reason as plain values."""
        return {"file": self.file, "reason": self.reason, "line": self.line}


@dataclass(frozen=True)
class IntakeResult:
    """Everything that one intake did."""

    spectra: tuple[TakenSpectrum, ...]
    skipped: tuple[Skipped, ...]
    library_state: str

    def to_json(self) -> dict[str, Any]:
        """The result as plain values (DESIGN section 8)."""
        return {
            "schema": 1,
            "library_state": self.library_state,
            "spectra": [s.to_json() for s in self.spectra],
            "skipped": [s.to_json() for s in self.skipped],
        }
