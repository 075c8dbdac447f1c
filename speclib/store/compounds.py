"""Compounds and structures: rows in, records out."""

from __future__ import annotations

import json
import re
import sqlite3
from collections.abc import Iterable

from speclib.errors import AmbiguousEntryError, EntryNotFoundError
from speclib.model.compound import Compound, Structure
from speclib.store.writing import WriteTransaction

_INCHIKEY = re.compile(r"[A-Z]{14}-[A-Z]{8}[SN][A-Z]-[A-Z]")
_SELECT = (
    "SELECT c.*, s.smiles, s.inchikey, s.skeleton, s.formula AS structure_formula, s.nominal_mass, s.exact_mass "
    "FROM compounds c LEFT JOIN structures s ON s.id = c.structure_id "
)


def _compounds(connection: sqlite3.Connection, where: str = "", values: Iterable[object] = ()) -> list[Compound]:
    """Compounds that meet a condition of this module, by id, with their names."""
    given = tuple(values)
    names: dict[int, dict[str, list[str]]] = {}
    chosen = f"SELECT c.id FROM compounds c LEFT JOIN structures s ON s.id = c.structure_id {where}"  # noqa: S608
    query = f"SELECT compound_id, kind, name FROM compound_names WHERE compound_id IN ({chosen}) ORDER BY id"  # noqa: S608
    for row in connection.execute(query, given):
        names.setdefault(row["compound_id"], {}).setdefault(row["kind"], []).append(row["name"])
    rows = connection.execute(f"{_SELECT}{where} ORDER BY c.id", given)
    return [_compound(row, names.get(row["id"], {})) for row in rows]


def _compound(row: sqlite3.Row, names: dict[str, list[str]]) -> Compound:
    structure = None
    if row["structure_id"] is not None:
        structure = Structure(
            row["smiles"],
            row["inchikey"],
            row["skeleton"],
            row["structure_formula"],
            row["nominal_mass"],
            row["exact_mass"],
        )
    return Compound(
        row["id"],
        row["uid"],
        row["name"],
        structure,
        structure.formula if structure else row["formula"],
        row["cas"],
        tuple(names.get("synonym", ())),
        tuple(names.get("class", ())),
        row["parent_id"],
        row["derivative"],
        row["rev"],
    )


def list_compounds(connection: sqlite3.Connection) -> list[Compound]:
    """All compounds by id."""
    return _compounds(connection)


def compounds_by_id(connection: sqlite3.Connection, ids: Iterable[int]) -> dict[int, Compound]:
    """The compounds of these ids that exist, by id."""
    wanted = json.dumps(sorted(set(ids)))
    found = _compounds(connection, "WHERE c.id IN (SELECT value FROM json_each(?))", (wanted,))
    return {compound.id: compound for compound in found}


def find_compounds(connection: sqlite3.Connection, text: str) -> list[Compound]:
    """Compounds that `text` may mean: an id, an InChIKey, a CAS number, or a name or synonym without regard to case."""
    wanted = text.strip()
    if _INCHIKEY.fullmatch(wanted):
        return _compounds(connection, "WHERE s.inchikey = ?", (wanted,))
    named = _compounds(
        connection,
        "WHERE c.name = ?1 OR c.cas = ?1 OR c.id IN "
        "(SELECT compound_id FROM compound_names WHERE name = ?1 AND kind = 'synonym')",
        (wanted,),
    )
    if not named and wanted.isascii() and wanted.isdigit() and len(wanted) < 18:
        return _compounds(connection, "WHERE c.id = ?", (int(wanted),))
    return named


def get_compound(connection: sqlite3.Connection, text: str) -> Compound:
    """The one compound that `text` means.

    Raises:
        EntryNotFoundError: none; names that come near are suggested.
        AmbiguousEntryError: several; they are listed.
    """
    found = find_compounds(connection, text)
    if len(found) == 1:
        return found[0]
    if found:
        listed = ", ".join(f"{c.id} {c.name} ({c.formula})" for c in found[:10])
        raise AmbiguousEntryError(f"{text!r} means several compounds: {listed}", "give the number")
    import difflib

    names = [row["name"] for row in connection.execute("SELECT name FROM compounds")]
    near = difflib.get_close_matches(text, names, n=3)
    hint = f"did you mean {', '.join(near)}?" if near else "see `speclib compound list`"
    raise EntryNotFoundError(f"the library holds no compound {text!r}", hint)


def find_by_inchikey(connection: sqlite3.Connection, inchikey: str) -> Compound | None:
    """The compound of that structure, the oldest if there are several."""
    found = _compounds(connection, "WHERE s.inchikey = ?", (inchikey,))
    return found[0] if found else None


def insert_structure(transaction: WriteTransaction, structure: Structure) -> int:
    """Store a structure once and return its id."""
    row = transaction.connection.execute("SELECT id FROM structures WHERE smiles = ?", (structure.smiles,)).fetchone()
    if row:
        return int(row["id"])
    return transaction.insert(
        "structures",
        smiles=structure.smiles,
        inchikey=structure.inchikey,
        skeleton=structure.skeleton,
        formula=structure.formula,
        nominal_mass=structure.nominal_mass,
        exact_mass=structure.exact_mass,
    )


def insert_compound(
    transaction: WriteTransaction,
    *,
    name: str,
    structure: Structure | None,
    formula: str | None,
    cas: str | None = None,
    synonyms: Iterable[str] = (),
    classes: Iterable[str] = (),
    parent_id: int | None = None,
    derivative: str | None = None,
) -> int:
    """Add a compound with its names and return its id."""
    compound_id = transaction.insert(
        "compounds",
        name=name,
        cas=cas,
        formula=None if structure else formula,
        structure_id=insert_structure(transaction, structure) if structure else None,
        parent_id=parent_id,
        derivative=derivative,
    )
    for kind, texts in (("synonym", synonyms), ("class", classes)):
        for text in dict.fromkeys(texts):
            transaction.insert("compound_names", compound_id=compound_id, kind=kind, name=text)
    return compound_id
