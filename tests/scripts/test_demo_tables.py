"""The demo library's tables hold right chemistry, and what is wrong in them is caught."""

from __future__ import annotations

import csv
import importlib
import sys
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest

from speclib.chemistry.formula import parse_formula
from speclib.chemistry.isotopes import isotope_pattern
from speclib.formats.reading import read_spectra
from speclib.model.spectrum import MassAccuracy

ROOT = Path(__file__).parents[2]
LIBRARY = ROOT / "demo_library"
DATA_FILES = sorted([*(LIBRARY / "spectra").iterdir(), *(LIBRARY / "unknowns").iterdir()])


@pytest.fixture
def tables(monkeypatch: pytest.MonkeyPatch) -> Any:
    monkeypatch.syspath_prepend(str(ROOT / "scripts"))
    yield importlib.import_module("_demo_tables")
    sys.modules.pop("_demo_tables", None)


def _rows(name: str) -> list[dict[str, str]]:
    with (LIBRARY / name).open(encoding="utf-8", newline="") as handle:
        return list(csv.DictReader(handle))


def _checked(tables: Any, peaks: Any) -> None:
    subjects = [*tables.read_compounds(LIBRARY / "tables"), *tables.read_unknowns(LIBRARY / "tables")]
    tables.check_tables(subjects, peaks, tables.read_mechanisms(LIBRARY / "tables"))


def test_every_formula_is_that_of_its_structure() -> None:
    from rdkit import Chem
    from rdkit.Chem.rdMolDescriptors import CalcMolFormula

    rows = [*_rows("tables/compounds.csv"), *_rows("tables/unknowns.csv")]
    assert len(rows) >= 14
    computed = {row["smiles"]: parse_formula(CalcMolFormula(Chem.MolFromSmiles(row["smiles"]))) for row in rows}
    assert computed == {row["smiles"]: parse_formula(row["formula"]) for row in rows}


@pytest.mark.parametrize("formula", ["C7H21O4Si4", "C16H30O4", "C4Cl6", "C6H3Br3O", "C6H6S2"])
def test_the_tables_isotope_pattern_agrees_with_the_packages(tables: Any, formula: str) -> None:
    ours = tables.isotope_pattern(tables.parse_formula(formula))
    theirs = isotope_pattern(parse_formula(formula))
    for offset, height in enumerate(ours):
        assert 100 * height == pytest.approx(theirs.get(offset, 0.0), abs=0.01)


def test_every_row_of_the_peak_table_adds_up(tables: Any) -> None:
    _checked(tables, tables.read_peaks(LIBRARY / "tables"))


@pytest.mark.parametrize(
    ("change", "said"),
    [
        ({"mz": 92}, "has the nominal mass 91"),
        ({"loss": "H2"}, "C7H7 + H2 is C7H9, not C7H8"),
        ({"ion": "H7C7"}, "in Hill order"),
        ({"mechanism": "benzilic cleavage"}, "is not in mechanisms.txt"),
        ({"mechanism": "molecular ion"}, "go together"),
        ({"compound": "tolune"}, "no such compound"),
        ({"height": 0.0}, "height above 0"),
        ({"ion": "C7H7Xx"}, "no isotopes"),
    ],
)
def test_a_wrong_row_is_named(tables: Any, change: dict[str, Any], said: str) -> None:
    peaks = tables.read_peaks(LIBRARY / "tables")
    place = next(i for i, p in enumerate(peaks) if p.compound == "toluene" and p.mz == 91)
    with pytest.raises(tables.TableError) as caught:
        _checked(tables, [*peaks[:place], replace(peaks[place], **change), *peaks[place + 1 :]])
    assert f"line {peaks[place].line}" in str(caught.value)
    assert said in str(caught.value)


def test_a_row_that_stands_twice_is_named(tables: Any) -> None:
    peaks = tables.read_peaks(LIBRARY / "tables")
    with pytest.raises(tables.TableError, match="stands there twice"):
        _checked(tables, [*peaks, peaks[0]])


@pytest.mark.parametrize("path", DATA_FILES, ids=lambda path: path.name)
def test_every_file_says_how_it_was_measured(path: Path) -> None:
    source = read_spectra(path)
    assert len(source.spectra) == 1
    assert source.spectra[0].notes == ()
    spectrum = source.spectra[0].spectrum
    assert 25 <= len(spectrum) <= 80
    assert spectrum.mass_accuracy is MassAccuracy.UNIT
    measured = spectrum.measurement
    assert (measured.mz_from, measured.mz_to, measured.electron_energy_ev) == (33, 400, 70)
    assert measured.retention_time_s is not None
    assert measured.retention_index is not None


def test_manifest_and_files_agree_on_retention() -> None:
    for row in _rows("manifest.csv"):
        measured = read_spectra(LIBRARY / row["file"]).spectra[0].spectrum.measurement
        assert measured.retention_time_s == pytest.approx(60 * float(row["rt_min"]), abs=0.01)
        assert measured.retention_index == float(row["ri"])


def test_most_references_are_confirmed_against_a_standard_that_says_it_is_invented() -> None:
    rows = _rows("manifest.csv")
    assert {row["compound"] for row in rows if row["status"] == "provisional"} == {"nonanal"}
    assert all("no such supplier exists" in row["standard"] for row in rows if row["status"] == "confirmed")


def test_assignments_stand_on_peaks_of_one_replicate() -> None:
    by_file: dict[str, list[float]] = {}
    for row in _rows("assignments.csv"):
        by_file.setdefault(row["file"], []).append(float(row["mz"]))
    assert len(by_file) == len({row["compound"] for row in _rows("manifest.csv")})
    for file, assigned in by_file.items():
        assert 6 <= len(assigned) <= 12
        assert set(assigned) <= set(read_spectra(LIBRARY / "spectra" / file).spectra[0].spectrum.mz.tolist())


def test_no_unknown_file_says_what_it_is() -> None:
    for row in _rows("tables/unknowns.csv"):
        text = (LIBRARY / "unknowns" / f"{row['file']}.txt").read_text(encoding="utf-8")
        assert row["compound"] not in text
        assert row["formula"] not in text
        assert row["smiles"] not in text
