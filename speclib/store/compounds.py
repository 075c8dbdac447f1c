"""Compounds and structures: rows in, records out."""

from __future__ import annotations

import json
import re
import sqlite3
from collections.abc import Iterable

from speclib.errors import AmbiguousEntryError, EntryNotFoundError
from speclib.model.compound import Compound, Structure
from speclib.store.schema import is_storable
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
    """Compounds that `text` may mean: as `find_compounds_by_name`, or else an id."""
    return find_compounds_by_name(connection, text) or _compound_of_number(connection, " ".join(text.split()))


def find_compounds_by_name(connection: sqlite3.Connection, text: str) -> list[Compound]:
    """Compounds of that InChIKey, CAS number, name or synonym, without regard to case; never of that id."""
    wanted = " ".join(text.split())
    if not is_storable(wanted):
        return []
    if _INCHIKEY.fullmatch(wanted.upper()):
        return _compounds(connection, "WHERE s.inchikey = ?", (wanted.upper(),))
    named = _compounds(
        connection,
        "WHERE c.name = ?1 OR c.cas = ?1 OR c.id IN "
        "(SELECT compound_id FROM compound_names WHERE name = ?1 AND kind = 'synonym')",
        (wanted,),
    )
    if named:
        return named
    if not wanted.isascii():
        # SQLite knows upper and lower case of ASCII letters only.
        folded = wanted.casefold()
        ids = [row["id"] for row in _all_names(connection) if row["name"].casefold() == folded]
        return list(compounds_by_id(connection, ids).values())
    return []


def _compound_of_number(connection: sqlite3.Connection, wanted: str) -> list[Compound]:
    if not (wanted.isascii() and wanted.isdigit() and len(wanted) < 18):
        return []
    return _compounds(connection, "WHERE c.id = ?", (int(wanted),))


def _all_names(connection: sqlite3.Connection) -> sqlite3.Cursor:
    return connection.execute(
        "SELECT id, name FROM compounds UNION SELECT compound_id, name FROM compound_names WHERE kind = 'synonym' "
        "ORDER BY id, name"
    )


def get_compound(connection: sqlite3.Connection, text: str) -> Compound:
    """The one compound that `text` means.

    Raises:
        EntryNotFoundError: none; names that come near are suggested.
        AmbiguousEntryError: several, or the name of one is the number of another; they are listed.
    """
    by_id = {c.id: c for c in (*find_compounds(connection, text), *_compound_of_number(connection, text.strip()))}
    found = list(by_id.values())
    if len(found) == 1:
        return found[0]
    if found:
        listed = ", ".join(f"{c.id} {c.name} ({c.formula or 'formula unknown'})" for c in found[:10])
        raise AmbiguousEntryError(f"{text!r} means several compounds: {listed}", "give the number, or the full name")
    import difflib

    names: dict[str, str] = {}
    for row in _all_names(connection):
        names.setdefault(row["name"].casefold(), row["name"])
    near = [names[folded] for folded in difflib.get_close_matches(" ".join(text.split()).casefold(), names, n=3)]
    hint = f"did you mean {', '.join(near)}?" if near else "see `speclib compound list`"
    raise EntryNotFoundError(f"the library holds no compound {text!r}", hint)


def reference_counts(connection: sqlite3.Connection) -> dict[int, tuple[int, int, int]]:
    """By compound id: references that are not withdrawn, confirmed ones among them, and their accepted assignments."""
    query = (
        "SELECT p.compound_id AS id, count(DISTINCT p.id) AS n, "
        "count(DISTINCT CASE WHEN p.status = 'confirmed' THEN p.id END) AS confirmed, "
        "count(DISTINCT CASE WHEN a.state = 'accepted' THEN a.id END) AS assigned "
        "FROM spectra p LEFT JOIN assignments a ON a.spectrum_id = p.id "
        "WHERE p.role = 'reference' AND p.status <> 'withdrawn' GROUP BY p.compound_id"
    )
    return {row["id"]: (row["n"], row["confirmed"], row["assigned"]) for row in connection.execute(query)}


def structure_id_of(connection: sqlite3.Connection, compound_id: int) -> int | None:
    """Local id of a compound's present structure row, or None."""
    row = connection.execute("SELECT structure_id FROM compounds WHERE id = ?", (compound_id,)).fetchone()
    return None if row is None else row["structure_id"]


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
        # Case does not tell names apart in the library.
        once: dict[str, str] = {}
        for text in texts:
            once.setdefault(text.lower(), text)
        for text in once.values():
            transaction.insert("compound_names", compound_id=compound_id, kind=kind, name=text)
    return compound_id
