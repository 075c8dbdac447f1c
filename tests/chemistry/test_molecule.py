"""Facts of a molecule from its SMILES."""

from __future__ import annotations

import re

import pytest
from rdkit.Chem import MolFromSmiles
from rdkit.Chem.rdMolDescriptors import CalcExactMolWt, CalcMolFormula

from speclib.chemistry.formula import parse_formula
from speclib.chemistry.molecule import MAX_SMILES_LENGTH, molecule_facts
from speclib.errors import InvalidStructureError

SMILES = [
    "CCCCCC=O",
    "C",
    "[H][H]",
    "O",
    "Cn1c(=O)c2c(ncn2C)n(C)c1=O",
    "C[Si]1(C)O[Si](C)(C)O[Si](C)(C)O[Si](C)(C)O1",
    "Oc1c(Br)cc(Br)cc1Br",
    "CCCC[Sn](CCCC)(CCCC)CCCC",
    "COB(OC)OC",
    "C[Se]C",
    "C[Hg]C",
    "FC(F)(F)c1ccc(I)cc1",
    "CSSC",
    "O=[N+]([O-])c1ccccc1",
    "CC[Ge](CC)(CC)CC",
    "COP(=O)(OC)OC",
    "C/C=C/C=O",
    "C[C@H](N)C(=O)O",
    "N#Cc1ccccc1Cl",
]


@pytest.mark.parametrize("smiles", SMILES)
def test_formula_and_mass_equal_those_of_rdkit(smiles: str) -> None:
    facts = molecule_facts(smiles)
    molecule = MolFromSmiles(smiles)
    assert facts.formula == parse_formula(CalcMolFormula(molecule))
    # RDKit carries older masses for Sn, Hg, Se and Ge.
    assert facts.formula.exact_mass == pytest.approx(CalcExactMolWt(molecule), abs=1e-5)


@pytest.mark.parametrize("smiles", SMILES)
def test_the_key_has_the_shape_of_a_standard_inchikey(smiles: str) -> None:
    facts = molecule_facts(smiles)
    assert re.fullmatch(r"[A-Z]{14}-[A-Z]{8}SA-N", facts.inchikey)
    assert facts.skeleton == facts.inchikey[:14]


@pytest.mark.parametrize("smiles", SMILES)
def test_the_canonical_smiles_says_the_same(smiles: str) -> None:
    facts = molecule_facts(smiles)
    assert molecule_facts(facts.smiles) == facts


def test_known_inchikeys() -> None:
    # From memory: caffeine, ethanol.
    assert molecule_facts("Cn1c(=O)c2c(ncn2C)n(C)c1=O").inchikey == "RYYVLZVUVIJVGH-UHFFFAOYSA-N"
    assert molecule_facts("CCO").inchikey == "LFQSCWFLJHTTHZ-UHFFFAOYSA-N"


def test_two_spellings_are_one_molecule() -> None:
    assert molecule_facts("OCC") == molecule_facts(" C(O)C ") == molecule_facts("[CH3][CH2][OH]")


def test_deuterium_labels_are_counted_as_d() -> None:
    facts = molecule_facts("[2H]C([2H])([2H])c1ccccc1")
    assert str(facts.formula) == "C7H5D3"
    assert facts.formula.nominal_mass == 95
    plain = molecule_facts("Cc1ccccc1")
    assert facts.inchikey != plain.inchikey
    assert facts.skeleton == plain.skeleton
    assert str(molecule_facts("[2H]O[2H]").formula) == "D2O"


def test_stereoisomers_share_the_skeleton_only() -> None:
    trans, cis = molecule_facts("C/C=C/C=O"), molecule_facts("C/C=C\\C=O")
    assert trans.inchikey != cis.inchikey
    assert trans.skeleton == cis.skeleton


@pytest.mark.parametrize(
    ("smiles", "reason"),
    [
        ("", "empty"),
        ("   ", "empty"),
        ("hexanal", "cannot be read|can be read"),
        ("CC(=O", "can be read"),
        ("C1CCCC", "can be read"),
        ("C[C@@H", "can be read"),
        ("C(C)(C)(C)(C)C", "can be read"),
        ("C>>C", "can be read"),
        ("C*", "wildcard"),
        ("*", "wildcard"),
        ("CCO.O", "components"),
        ("[Na+].[Cl-]", "components"),
        ("C[N+](C)(C)C", "charged"),
        ("CC(=O)[O-]", "charged"),
        ("[13CH4]", "isotope label"),
        ("[3H]C", "isotope label"),
        ("C[As](C)C", "does not know"),
        ("C C", "blank"),
        ("CCO ethanol", "blank"),
        ("CC\tO", "blank|character"),
        ("CC\nO", "blank|character"),
        ("CC\x00O", "character"),
        ("C\udcffC", "character"),
        ("C\u0421", "character"),
        ("C" * (MAX_SMILES_LENGTH + 1), "characters is not read"),
        ("C" * 1500, "InChI"),
    ],
)
def test_what_is_no_single_neutral_molecule_is_refused_with_the_reason(smiles: str, reason: str) -> None:
    with pytest.raises(InvalidStructureError, match=reason):
        molecule_facts(smiles)


def test_a_dot_that_a_ring_closure_bridges_is_no_second_component() -> None:
    assert str(molecule_facts("C1.C1").formula) == "C2H6"


def test_nothing_is_printed_about_what_cannot_be_read(capfd: pytest.CaptureFixture[str]) -> None:
    with pytest.raises(InvalidStructureError):
        molecule_facts("CC(=O")
    assert capfd.readouterr() == ("", "")


def test_a_volatile_complex_drawn_as_ions_is_one_molecule() -> None:
    # ferrocene, C10H10Fe (its 56Fe reference is among the golden isotope patterns)
    assert str(molecule_facts("[CH-]1C=CC=C1.[CH-]1C=CC=C1.[Fe+2]").formula) == "C10H10Fe"
    with pytest.raises(InvalidStructureError, match="several components"):
        molecule_facts("CC(=O)[O-].[Na+]")
