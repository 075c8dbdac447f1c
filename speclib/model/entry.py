"""A spectrum as the library holds it."""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum
from typing import Any

from speclib.model.compound import Compound
from speclib.model.spectrum import Spectrum


class Role(StrEnum):
    """What a stored spectrum is for."""

    REFERENCE = "reference"
    UNKNOWN = "unknown"
    CONSENSUS = "consensus"


class Status(StrEnum):
    """Where a reference stands; `confirmed` means signed off against a standard."""

    PROVISIONAL = "provisional"
    CONFIRMED = "confirmed"
    WITHDRAWN = "withdrawn"


@dataclass(frozen=True)
class LibrarySpectrum:
    """A stored spectrum with its role, status, compound and source."""

    id: int
    uid: str
    role: Role
    status: Status | None
    spectrum: Spectrum
    compound: Compound | None = None
    source_file: str | None = None
    source_index: int = 1
    molecular_mass: int | None = None
    rev: int = 1

    @property
    def label(self) -> str:
        """How people call it: number, and compound or file."""
        name = self.compound.name if self.compound else (self.source_file or "unknown")
        return f"spectrum {self.id} ({name})"

    def to_json(self) -> dict[str, Any]:
        """What the library records of the spectrum, without the peaks."""
        return {
            "id": self.id,
            "uid": self.uid,
            "role": self.role.value,
            "status": self.status.value if self.status else None,
            "compound": self.compound.short_json() if self.compound else None,
            "source_file": self.source_file,
            "source_index": self.source_index,
            "peak_count": len(self.spectrum),
            "mass_accuracy": self.spectrum.mass_accuracy.value,
            "measurement": self.spectrum.measurement.known(),
            "content_hash": self.spectrum.content_hash,
            "rev": self.rev,
        }
