"""Compounds: add, list, show."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from speclib.chemistry.cas import is_valid_cas
from speclib.chemistry.formula import parse_formula, require_closed_shell
from speclib.errors import InvalidValueError, RefusedError
from speclib.model.assignment import Assignment
from speclib.model.compound import Compound, Structure
from speclib.model.entry import LibrarySpectrum
from speclib.store.assignments import accepted_assignments
from speclib.store.compounds import (
    compounds_by_id,
    find_by_inchikey,
    find_compounds_by_name,
    get_compound,
    insert_compound,
    list_compounds,
    reference_counts,
)
from speclib.store.library import Library
from speclib.store.spectra import spectra_of_compound
from speclib.store.writing import WriteTransaction

MAX_NAME_LENGTH = 300


@dataclass(frozen=True)
class NewCompound:
    """What a person says of a compound; a SMILES or at least a formula is needed."""

    name: str
    smiles: str | None = None
    formula: str | None = None
    cas: str | None = None
    synonyms: tuple[str, ...] = ()
    classes: tuple[str, ...] = ()
    derivative_of: str | None = None
    derivative: str | None = None


@dataclass(frozen=True)
class CompoundDetails:
    """A compound with its spectra and accepted assignments."""

    compound: Compound
    spectra: tuple[LibrarySpectrum, ...]
    assignments: tuple[Assignment, ...]

    def to_json(self) -> dict[str, Any]:
        """The details as plain values."""
        return {
            "schema": 1,
            "compound": self.compound.to_json(),
            "spectra": [s.to_json() for s in self.spectra],
            "assignments": [a.to_json() for a in self.assignments],
        }


@dataclass(frozen=True)
class CompoundSummary:
    """A compound in a list, with how much the library knows of it."""

    compound: Compound
    references: int
    confirmed: int
    assignments: int

    def to_json(self) -> dict[str, Any]:
        """The summary as plain values."""
        return {
            **self.compound.to_json(),
            "references": self.references,
            "confirmed": self.confirmed,
            "assignments": self.assignments,
        }


def structure_from_smiles(smiles: str) -> Structure:
    """The structure of a SMILES.

    Raises:
        InvalidStructureError: as `chemistry.molecule.molecule_facts`.
    """
    from speclib.chemistry.molecule import molecule_facts

    facts = molecule_facts(smiles)
    formula = facts.formula
    return Structure(
        facts.smiles, facts.inchikey, facts.skeleton, str(formula), formula.nominal_mass, formula.exact_mass
    )


@dataclass(frozen=True)
class CheckedCompound:
    """A new compound after its checks, ready to be written."""

    new: NewCompound
    structure: Structure | None
    formula: str | None

    @property
    def molecular_formula(self) -> str | None:
        """Formula of the structure, or the one given."""
        return self.structure.formula if self.structure else self.formula


def check_new_compound(new: NewCompound) -> CheckedCompound:
    """Check everything that needs no library.

    Raises:
        InvalidValueError, InvalidStructureError, InvalidFormulaError: which value cannot be used, and why.
    """
    name = " ".join(new.name.split())
    if not name or len(name) > MAX_NAME_LENGTH or not name.isprintable():
        raise InvalidValueError(
            f"a compound cannot be called {new.name[:40]!r}",
            f"use 1 to {MAX_NAME_LENGTH} printable characters",
        )
    if new.cas and not is_valid_cas(new.cas):
        raise InvalidValueError(f"{new.cas!r} is not a CAS number (form or check digit is wrong)", "check the digits")
    structure = structure_from_smiles(new.smiles) if new.smiles else None
    formula = str(parse_formula(new.formula)) if new.formula else None
    if structure and formula and formula != structure.formula:
        raise InvalidValueError(
            f"{name}: the formula {formula} is not that of the SMILES ({structure.formula})", "correct one"
        )
    if formula and not structure:
        require_closed_shell(parse_formula(formula))
    if not structure and not formula:
        raise InvalidValueError(
            f"{name}: neither a SMILES nor a formula is given", "give --smiles, or --formula if there is none"
        )
    tidy = NewCompound(
        name,
        new.smiles,
        formula,
        new.cas or None,
        new.synonyms,
        new.classes,
        new.derivative_of,
        new.derivative,
    )
    return CheckedCompound(tidy, structure, formula)


def write_compound(transaction: WriteTransaction, checked: CheckedCompound) -> int:
    """Write a checked compound inside a transaction.

    Raises:
        RefusedError: the structure is held already, or the name belongs to another compound.
        EntryNotFoundError, AmbiguousEntryError: the parent of a derivative.
    """
    new, connection = checked.new, transaction.connection
    if checked.structure:
        held = find_by_inchikey(connection, checked.structure.inchikey)
        if held:
            raise RefusedError(
                f"the structure of {new.name} is held already as compound {held.id} ({held.name})",
                "use that one",
            )
    named = [c for c in find_compounds_by_name(connection, new.name) if c.name.casefold() == new.name.casefold()]
    if named:
        raise RefusedError(
            f"a compound called {named[0].name} is held already (compound {named[0].id})",
            "choose another name",
        )
    parent = get_compound(connection, new.derivative_of) if new.derivative_of else None
    return insert_compound(
        transaction,
        name=new.name,
        structure=checked.structure,
        formula=checked.formula,
        cas=new.cas,
        synonyms=new.synonyms,
        classes=new.classes,
        parent_id=parent.id if parent else None,
        derivative=new.derivative,
    )


def add_compound(library: Library, new: NewCompound, *, analyst: str | None) -> Compound:
    """Add one compound.

    Raises:
        InvalidValueError, InvalidStructureError, InvalidFormulaError, RefusedError: why it cannot be added.
    """
    checked = check_new_compound(new)
    with library.writing("compound add", analyst=analyst) as transaction:
        compound_id = write_compound(transaction, checked)
        transaction.detail = {"compound": checked.new.name, "formula": checked.molecular_formula}
    with library.reading() as connection:
        return compounds_by_id(connection, [compound_id])[compound_id]


def summarize_compounds(library: Library, *, class_name: str | None = None) -> list[CompoundSummary]:
    """All compounds (of a class), each with counts of references, confirmed ones and accepted assignments."""
    with library.reading() as connection:
        counts = reference_counts(connection)
        compounds = list_compounds(connection)
    wanted = class_name.casefold() if class_name else None
    return [
        CompoundSummary(compound, *counts.get(compound.id, (0, 0, 0)))
        for compound in compounds
        if wanted is None or wanted in (c.casefold() for c in compound.classes)
    ]


def show_compound(library: Library, text: str) -> CompoundDetails:
    """A compound with spectra and accepted assignments.

    Raises:
        EntryNotFoundError, AmbiguousEntryError: what `text` may mean.
    """
    with library.reading() as connection:
        compound = get_compound(connection, text)
        spectra = spectra_of_compound(connection, compound.id)
        assignments: Sequence[Assignment] = accepted_assignments(connection, compound.id)
    return CompoundDetails(compound, tuple(spectra), tuple(assignments))
