"""Compounds and their immutable structures."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any


@dataclass(frozen=True)
class Structure:
    """An immutable structure: canonical SMILES, full InChIKey (identity), formula in Hill order, masses in Da."""

    smiles: str
    inchikey: str
    skeleton: str
    formula: str
    nominal_mass: int
    exact_mass: float


@dataclass(frozen=True)
class Compound:
    """A substance of the library. `formula` is that of the structure when there is one."""

    id: int
    uid: str
    name: str
    structure: Structure | None = None
    formula: str | None = None
    cas: str | None = None
    synonyms: tuple[str, ...] = ()
    classes: tuple[str, ...] = ()
    parent_id: int | None = None
    derivative: str | None = None
    rev: int = 1

    @property
    def identity(self) -> str:
        """What makes two compounds the same for EI: first InChIKey block and nominal mass; else name and formula."""
        if self.structure:
            return f"{self.structure.skeleton}|{self.structure.nominal_mass}"
        return f"{self.name.casefold()}|{self.formula}"

    def to_json(self) -> dict[str, Any]:
        """The compound as plain values."""
        s = self.structure
        return {
            "id": self.id,
            "uid": self.uid,
            "name": self.name,
            "synonyms": list(self.synonyms),
            "classes": list(self.classes),
            "cas": self.cas,
            "formula": self.formula,
            "inchikey": s.inchikey if s else None,
            "smiles": s.smiles if s else None,
            "nominal_mass": s.nominal_mass if s else None,
            "exact_mass": round(s.exact_mass, 6) if s else None,
            "derivative_of": self.parent_id,
            "derivative": self.derivative,
            "rev": self.rev,
        }

    def short_json(self) -> dict[str, Any]:
        """Identity only, as neighbours carry it."""
        s = self.structure
        return {
            "id": self.id,
            "name": self.name,
            "formula": self.formula,
            "inchikey": s.inchikey if s else None,
            "smiles": s.smiles if s else None,
        }
