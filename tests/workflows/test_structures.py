"""Many compounds from one file."""

from __future__ import annotations

from pathlib import Path

import pytest
from rdkit import Chem

from speclib.errors import InputFileError
from speclib.store.library import Library
from speclib.workflows.structures import add_compounds_from


@pytest.fixture
def library(tmp_path: Path) -> Library:
    return Library.create(tmp_path / "lab.sqlite", analyst="A")


def sd_record(smiles: str, name: str, **fields: str) -> str:
    molecule = Chem.MolFromSmiles(smiles)
    molecule.SetProp("_Name", name)
    data = "".join(f">  <{key}>\n{value}\n\n" for key, value in fields.items())
    return f"{Chem.MolToMolBlock(molecule)}{data}$$$$\n"


def test_an_sd_file_gives_names_structures_and_fields(library: Library, tmp_path: Path) -> None:
    path = tmp_path / "many.sdf"
    path.write_text(
        sd_record("CCO", "ethanol", CAS="64-17-5", synonyms="ethyl alcohol") + sd_record("CCCO", "propanol")
    )
    result = add_compounds_from(library, path, analyst="A")
    assert [(c.name, c.formula, c.cas, c.synonyms) for c in result.compounds] == [
        ("ethanol", "C2H6O", "64-17-5", ("ethyl alcohol",)),
        ("propanol", "C3H8O", None, ()),
    ]


def test_a_bad_record_does_not_stop_the_others(library: Library, tmp_path: Path) -> None:
    path = tmp_path / "many.sdf"
    path.write_text(
        sd_record("CCO", "ethanol") + "broken\n\n\nnonsense\n$$$$\n" + sd_record("CCCO", "propanol"), "utf-8"
    )
    result = add_compounds_from(library, path, analyst="A")
    assert [c.name for c in result.compounds] == ["ethanol", "propanol"]
    assert result.skipped[0].reason.startswith("many.sdf, record 2: ")


def test_three_hundred_structures_need_one_command(library: Library, tmp_path: Path) -> None:
    path = tmp_path / "alkanes.csv"
    rows = [f"alkanol {n},{'C' * n}O" for n in range(1, 151)] + [f"alkanal {n},{'C' * n}C=O" for n in range(1, 151)]
    path.write_text("compound,smiles\n" + "\n".join(rows) + "\n", encoding="utf-8")
    result = add_compounds_from(library, path, analyst="A")
    assert (len(result.compounds), result.skipped) == (300, ())


def test_the_same_structure_twice_is_skipped_with_its_line(library: Library, tmp_path: Path) -> None:
    path = tmp_path / "twice.csv"
    path.write_text("compound,smiles\nethanol,CCO\nalcohol,OCC\n", encoding="utf-8")
    result = add_compounds_from(library, path, analyst="A")
    assert [s.line for s in result.skipped] == [3]
    assert "held already as compound 1" in result.skipped[0].reason


@pytest.mark.parametrize("content", [b"", b"\xff\xfe\x00bad", b"name\nx\n"])
def test_a_file_that_is_no_structure_file_is_refused(library: Library, tmp_path: Path, content: bytes) -> None:
    path = tmp_path / "odd.csv"
    path.write_bytes(content)
    with pytest.raises(InputFileError, match=r"odd\.csv"):
        add_compounds_from(library, path, analyst="A")


def test_a_derivative_may_stand_above_its_parent(library: Library, tmp_path: Path) -> None:
    path = tmp_path / "family.csv"
    path.write_text(
        "compound,smiles,derivative_of,derivative\noctanol TMS,CCCCCCCCO[Si](C)(C)C,octanol,TMS\noctanol,CCCCCCCCO,,\n",
        encoding="utf-8",
    )
    result = add_compounds_from(library, path, analyst="A")
    assert result.skipped == ()
    assert {c.name: c.derivative for c in result.compounds} == {"octanol TMS": "TMS", "octanol": None}
