"""The one door to RDKit: facts of a molecule from its SMILES.

RDKit loads on first use, because it costs a noticeable fraction of a second.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from typing import Any

from speclib.chemistry.elements import ELEMENTS
from speclib.chemistry.formula import Formula
from speclib.errors import InvalidStructureError

MAX_SMILES_LENGTH = 2000
COMPLEX_METALS = frozenset({"Fe", "Ge", "Sn", "Hg", "Pb"})


@dataclass(frozen=True)
class MoleculeFacts:
    """What a SMILES says: canonical SMILES, standard InChIKey and the formula (deuterium labels as D)."""

    smiles: str
    inchikey: str
    formula: Formula

    @property
    def skeleton(self) -> str:
        """First block of the InChIKey: the connectivity, without stereo and isotope layers."""
        return self.inchikey.split("-", 1)[0]


def molecule_facts(smiles: str) -> MoleculeFacts:
    """Read a SMILES.

    Raises:
        InvalidStructureError: empty, unreadable, several components, wildcard atoms, charged as a whole, no standard
        InChI, or an element outside the supported ones.
    """
    from rdkit import Chem, RDLogger
    from rdkit.Chem import inchi

    text = smiles.strip()
    if not text:
        raise InvalidStructureError("an empty text is not a SMILES")
    if len(text) > MAX_SMILES_LENGTH:
        raise InvalidStructureError(f"a SMILES of {len(text)} characters is not read")
    if not text.isascii() or not text.isprintable() or " " in text:
        # RDKit takes what follows a blank for a name: "C C" would become methane.
        raise InvalidStructureError(f"{text!r} is not a SMILES: it holds a blank or a character outside ASCII")
    RDLogger.DisableLog("rdApp.*")  # type: ignore[attr-defined]
    molecule = Chem.MolFromSmiles(text)
    if molecule is None:
        raise InvalidStructureError(f"{text!r} is not a SMILES that can be read", "check brackets, rings and valences")
    if molecule.GetNumAtoms() == 0 or any(atom.GetAtomicNum() == 0 for atom in molecule.GetAtoms()):
        raise InvalidStructureError(f"{text!r} has no atoms or has wildcard atoms", "draw the whole molecule")
    if "." in text and not _is_drawn_as_ions_of_a_complex(molecule):
        raise InvalidStructureError(f"{text!r} has several components", "a compound is one molecule")
    if Chem.GetFormalCharge(molecule) != 0:
        raise InvalidStructureError(f"{text!r} is charged", "give the neutral molecule")
    key = inchi.MolToInchiKey(molecule)  # type: ignore[no-untyped-call]
    if not key:
        raise InvalidStructureError(f"{text!r} has no standard InChI", "check the structure")
    return MoleculeFacts(Chem.MolToSmiles(molecule), key, _formula(Chem.AddHs(molecule), text))


def _is_drawn_as_ions_of_a_complex(molecule: Any) -> bool:
    """Whether the components are one volatile complex drawn as ions, such as ferrocene; salts and solvates are not."""
    from rdkit import Chem

    fragments = Chem.GetMolFrags(molecule, asMols=True)
    alone = [fragment.GetAtomWithIdx(0).GetSymbol() for fragment in fragments if fragment.GetNumAtoms() == 1]
    return len(fragments) == 1 or any(symbol in COMPLEX_METALS for symbol in alone)


def _formula(molecule: object, text: str) -> Formula:
    counts: dict[str, int] = {}
    for atom in molecule.GetAtoms():  # type: ignore[attr-defined]
        symbol = atom.GetSymbol()
        if symbol == "H" and atom.GetIsotope() == 2:
            symbol = "D"
        elif atom.GetIsotope():
            raise InvalidStructureError(f"{text!r} has an isotope label other than deuterium", "only D is supported")
        if symbol not in ELEMENTS:
            raise InvalidStructureError(f"{text!r} holds {symbol}, which speclib does not know")
        counts[symbol] = counts.get(symbol, 0) + 1
    return Formula.of(counts)


@dataclass(frozen=True)
class StructureRecord:
    """One record of a structure file: its number from 1, name, SMILES ("" when it cannot be read) and data fields."""

    number: int
    name: str
    smiles: str
    fields: dict[str, str]


def records_of_sdf(text: str) -> list[StructureRecord]:
    """Molecules of an SD file (connection tables with data fields, records end in `$$$$`), unreadable ones included."""
    import io

    from rdkit import Chem, RDLogger

    RDLogger.DisableLog("rdApp.*")  # type: ignore[attr-defined]
    # RDKit's stubs do not say that an unreadable record comes as None.
    supplier: Iterable[Any] = Chem.ForwardSDMolSupplier(io.BytesIO(text.encode()), removeHs=True)
    records = []
    for number, molecule in enumerate(supplier, start=1):
        if molecule is None:
            records.append(StructureRecord(number, "", "", {}))
            continue
        fields = {name.casefold(): str(molecule.GetProp(name)) for name in molecule.GetPropNames()}
        name = molecule.GetProp("_Name") if molecule.HasProp("_Name") else ""
        records.append(StructureRecord(number, name.strip(), Chem.MolToSmiles(molecule), fields))
    return records
