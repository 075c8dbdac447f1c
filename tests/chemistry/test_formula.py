"""Formulas: reading, Hill order, arithmetic, masses, RDBE and parity; against check values and two packages."""

from __future__ import annotations

import json
import random
import re
from pathlib import Path
from typing import Any

import molmass
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from pyteomics import mass as pyteomics_mass

from speclib.chemistry.elements import ELECTRON_MASS, ELEMENTS
from speclib.chemistry.formula import (
    MAX_ATOMS,
    MAX_FORMULA_LENGTH,
    Formula,
    obeys_nitrogen_rule,
    parse_formula,
    parse_ion_formula,
    require_closed_shell,
)
from speclib.errors import InvalidFormulaError

GOLDEN = Path(__file__).parents[1] / "golden"


def golden(name: str) -> list[dict[str, Any]]:
    values: list[dict[str, Any]] = json.loads((GOLDEN / name).read_text(encoding="utf-8"))["values"]
    return values


def formulas(symbols: tuple[str, ...] = tuple(ELEMENTS), most: int = 40) -> st.SearchStrategy[Formula]:
    return st.dictionaries(st.sampled_from(symbols), st.integers(1, most), min_size=1, max_size=6).map(Formula.of)


def seeded_formulas(count: int) -> list[Formula]:
    """Formulas over all elements but D, which packages spell differently."""
    rng = random.Random(20260131)
    symbols = [symbol for symbol in ELEMENTS if symbol != "D"]
    made = []
    for _ in range(count):
        chosen = rng.sample(symbols, rng.randint(1, 6))
        made.append(Formula.of({symbol: rng.randint(1, 30 if symbol in "CH" else 5) for symbol in chosen}))
    return made


@pytest.mark.parametrize(
    ("text", "written"),
    [
        ("C8H10N4O2", "C8H10N4O2"),
        ("O2N4H10C8", "C8H10N4O2"),
        ("C 3 H 8 O 1", "C3H8O"),
        (" CH4 ", "CH4"),
        ("HBr", "BrH"),
        ("H3N", "H3N"),
        ("SiH4", "H4Si"),
        ("ClCH3", "CH3Cl"),
        ("CD3OD", "CD4O"),
        ("CHDO", "CHDO"),
        ("D2O", "D2O"),
        ("CH3CH2OH", "C2H6O"),
        ("Fe(C5H5)2", "C10H10Fe"),
        ("(CH3)3SiO(Si(CH3)2O)2Si(CH3)3", "C10H30O3Si4"),
        ("CO", "CO"),
        ("C2Cl4", "C2Cl4"),
    ],
)
def test_formulas_are_read_and_written_in_hill_order(text: str, written: str) -> None:
    assert str(parse_formula(text)) == written


@pytest.mark.parametrize(
    "text",
    [
        "",
        "   ",
        "Xx2",
        "Co",
        "c6h6",
        "C0",
        "C01",
        "C-1",
        "C1.5",
        "C2H3O+",
        "[C2H3O]+",
        "C6H5(",
        "C6H5)",
        "(C6H5",
        ")C(",
        "()",
        "C()2",
        "(C)0",
        "2H",
        "C6H6;",
        "=1+1",
        "C\u2086H\u2086",  # subscript digits
        "C\u0663H\u0668",  # Arabic-Indic digits
        "C\u0660H4",  # an Arabic-Indic zero must not pass for C0
        "C999999",
        f"C{MAX_ATOMS + 1}",
        "(((C99)99)99)99",
        "C" * (MAX_FORMULA_LENGTH + 1),
    ],
)
def test_what_is_no_formula_is_refused(text: str) -> None:
    with pytest.raises(InvalidFormulaError):
        parse_formula(text)


@settings(deadline=None)
@given(st.text(alphabet="CHNOSiDBr()0123456789+. -\u2082x", max_size=30))
def test_any_text_is_read_or_refused(text: str) -> None:
    try:
        formula = parse_formula(text)
    except InvalidFormulaError:
        return
    assert formula
    assert parse_formula(str(formula)) == formula


def test_counts_below_zero_and_unknown_elements_are_refused() -> None:
    with pytest.raises(InvalidFormulaError):
        Formula.of({"C": -1})
    with pytest.raises(InvalidFormulaError):
        Formula.of({"U": 1})
    assert Formula.of({"C": 0, "H": 2}) == parse_formula("H2")


@pytest.mark.parametrize("text", ["C3H6O", "C3H6O+", "C3H6O+.", "C3H6O.+", "C3H6O\u2022+", "C3H6O+\u00b7", " C3H6O+ "])
def test_an_ion_may_carry_its_charge_sign(text: str) -> None:
    assert str(parse_ion_formula(text)) == "C3H6O"


@pytest.mark.parametrize("text", ["+", "C3H6O-", "C3H6O2-", "C3H6O++", "C3+H6O"])
def test_other_charges_are_refused(text: str) -> None:
    with pytest.raises(InvalidFormulaError):
        parse_ion_formula(text)


@settings(deadline=None)
@given(formulas())
def test_writing_and_reading_give_the_formula_back(formula: Formula) -> None:
    assert parse_formula(str(formula)) == formula
    assert hash(parse_formula(str(formula))) == hash(formula)


@settings(deadline=None)
@given(formulas())
def test_hill_order_is_carbon_hydrogen_deuterium_then_alphabet_and_without_carbon_the_alphabet(
    formula: Formula,
) -> None:
    symbols = [symbol for symbol, _ in formula]
    rest = [symbol for symbol in symbols if symbol not in ("C", "H", "D")]
    if "C" in symbols:
        assert symbols == [symbol for symbol in ("C", "H", "D") if symbol in symbols] + sorted(rest)
    else:
        assert symbols == sorted(symbols)


@settings(deadline=None)
@given(formulas(), formulas())
def test_sum_and_difference_undo_each_other(a: Formula, b: Formula) -> None:
    total = a + b
    assert total == b + a
    assert total - b == a
    assert total.contains(a)
    assert total.contains(b)
    assert total.nominal_mass == a.nominal_mass + b.nominal_mass
    assert total.exact_mass == pytest.approx(a.exact_mass + b.exact_mass, abs=1e-9)
    assert total.rdbe == a.rdbe + b.rdbe - 1


@settings(deadline=None)
@given(formulas(most=5), formulas(most=5))
def test_a_difference_exists_exactly_when_the_other_is_contained(a: Formula, b: Formula) -> None:
    if a.contains(b):
        assert (a - b) + b == a
    else:
        with pytest.raises(InvalidFormulaError):
            a - b


def test_labels_are_kept_apart() -> None:
    labelled, plain = parse_formula("CD3OH"), parse_formula("CH4O")
    assert not labelled.contains(plain)
    assert not plain.contains(parse_formula("D"))
    assert labelled.nominal_mass - plain.nominal_mass == 3


def test_absent_elements_count_zero_and_atoms_are_added_up() -> None:
    formula = parse_formula("C6H12O")
    assert (formula["N"], formula["C"], formula.atom_count) == (0, 6, 19)
    assert not Formula()


@pytest.mark.parametrize("row", golden("exact_masses.json"), ids=lambda row: f"{row['formula']}{'+' * row['charge']}")
def test_exact_and_nominal_masses_equal_the_check_values(row: dict[str, Any]) -> None:
    formula = parse_formula(row["formula"])
    value = formula.ion_mz(row["charge"]) if row["charge"] else formula.exact_mass
    assert value == pytest.approx(row["value"], abs=1e-5)
    assert formula.nominal_mass == row["nominal"]


@pytest.mark.parametrize(
    ("formula", "nominal"),
    [
        ("C40H82", 562),
        ("C56H114", 786),
        ("CBr4", 328),
        ("C6Br6", 546),
        ("C6H3Br3O", 328),
        ("C2H6Se", 110),
        ("CHI3", 394),
    ],
)
def test_the_nominal_mass_is_not_the_rounded_exact_mass(formula: str, nominal: int) -> None:
    assert parse_formula(formula).nominal_mass == nominal


def test_exact_masses_equal_molmass_and_pyteomics() -> None:
    for formula in seeded_formulas(300):
        # Element by element, because monoisotopic means "lightest" or "most abundant" depending on the package.
        by_molmass = sum(molmass.ELEMENTS[s].isotopes[ELEMENTS[s].nominal_mass].mass * count for s, count in formula)
        by_pyteomics = sum(pyteomics_mass.nist_mass[s][ELEMENTS[s].nominal_mass][0] * count for s, count in formula)
        # Mass evaluations differ by up to 1e-6 an atom (B, Br, Fe, I) and 8e-6 (Sn, Hg) between the packages.
        slack = sum(count * (1e-5 if s in ("Sn", "Hg") else 2.5e-6) for s, count in formula if s not in "CHNOFSiClSP")
        assert formula.exact_mass == pytest.approx(by_molmass, abs=1e-6 + slack)
        assert formula.exact_mass == pytest.approx(by_pyteomics, abs=1e-5 + slack)


def test_whole_formulas_and_ions_equal_molmass_and_pyteomics_as_they_read_them() -> None:
    rng = random.Random(7)
    for _ in range(300):
        counts = {"C": rng.randint(1, 30), "H": rng.randint(0, 62), "N": rng.randint(0, 5), "O": rng.randint(0, 8)}
        counts |= {"S": rng.randint(0, 3), "Si": rng.randint(0, 4), "Cl": rng.randint(0, 4), "F": rng.randint(0, 6)}
        formula = Formula.of(counts)
        text = str(formula)
        neutral = molmass.Formula(text)
        assert formula.exact_mass == pytest.approx(neutral.monoisotopic_mass, abs=1e-5)
        assert formula.exact_mass == pytest.approx(pyteomics_mass.calculate_mass(formula=text), abs=2e-5)
        # Traps: molmass .mz takes the average mass, pyteomics charge=1 adds a proton.
        assert formula.ion_mz() == pytest.approx(molmass.Formula(f"[{text}]+").monoisotopic_mass, abs=1e-5)
        assert formula.ion_mz() == pytest.approx(pyteomics_mass.calculate_mass(formula=text) - ELECTRON_MASS, abs=2e-5)
        assert re.sub(r"\s", "", neutral.formula) == text  # molmass writes Hill order too


def test_a_doubly_charged_ion_has_half_the_mz() -> None:
    formula = parse_formula("C16H10")
    assert formula.ion_mz(2) == pytest.approx(formula.exact_mass / 2 - ELECTRON_MASS)
    for charge in (0, -1):
        with pytest.raises(InvalidFormulaError):
            formula.ion_mz(charge)


@pytest.mark.parametrize("row", golden("rdbe_parity.json"), ids=lambda row: f"{row['formula']}{'+' * row['charge']}")
def test_rdbe_parity_and_nitrogen_rule_equal_the_check_values(row: dict[str, Any]) -> None:
    formula = parse_formula(row["formula"])
    assert formula.rdbe == row["rdbe"]
    assert formula.nominal_mass == row["nominal"]
    assert formula["N"] == row["nitrogen_count"]
    assert (formula.nominal_mass % 2 == 0) is row["nominal_mass_is_even"]
    if row["charge"]:
        assert formula.ion_parity == row["ion_parity"]
    # Molecules and OE ions follow the rule, EE ions are the other way round.
    assert obeys_nitrogen_rule(formula) is (row.get("ion_parity") != "EE")


@pytest.mark.parametrize(
    ("formula", "obeyed"),
    [
        ("C6D6", True),
        ("C6H5D", True),
        ("CD3OH", True),
        ("C3H9BO3", True),
        ("C2H6Se", True),
        ("NO", False),
        ("CH3", False),
    ],
)
def test_nitrogen_rule_beyond_the_common_elements(formula: str, obeyed: bool) -> None:
    assert obeys_nitrogen_rule(parse_formula(formula)) is obeyed


@settings(deadline=None)
@given(formulas(("C", "H", "D", "N", "O", "F", "Si", "P", "S", "Cl", "Br", "I", "Se", "Ge", "Sn")))
def test_a_whole_number_of_rings_and_double_bonds_and_the_nitrogen_rule_are_one_statement(formula: Formula) -> None:
    assert obeys_nitrogen_rule(formula) is float(formula.rdbe).is_integer()
    assert formula.ion_parity == ("OE" if obeys_nitrogen_rule(formula) else "EE")


def test_lowest_rdbe_of_an_ion() -> None:
    assert parse_formula("H4N").rdbe == -0.5
    assert parse_formula("H3O").rdbe == -0.5


@pytest.mark.parametrize("text", ["C6H6", "CH3NO2", "SF6", "PCl5", "C10H10Fe", "C6D6", "C8H20Sn"])
def test_formulas_of_molecules_are_taken(text: str) -> None:
    require_closed_shell(parse_formula(text))


@pytest.mark.parametrize("text", ["CH3", "C9H17O2", "C2H9", "NO"])
def test_radicals_and_impossible_molecules_are_refused(text: str) -> None:
    with pytest.raises(InvalidFormulaError, match="neutral molecule"):
        require_closed_shell(parse_formula(text))
