"""What is given of the molecule, and how it is understood."""

from __future__ import annotations

import pytest

from speclib.chemistry.formula import parse_formula
from speclib.errors import InvalidFormulaError, InvalidValueError
from speclib.workflows.query import Molecule, given_molecule


def test_a_mass_without_decimal_point_is_nominal() -> None:
    assert given_molecule("286", None) == Molecule(286, None, None)


def test_a_mass_with_decimal_point_is_exact() -> None:
    assert given_molecule("286.2144", None) == Molecule(286, 286.2144, None)


def test_a_formula_gives_both_masses() -> None:
    found = given_molecule(None, "C16H30O4")
    assert (found.nominal_mass, found.formula) == (286, parse_formula("C16H30O4"))
    assert found.exact_mass == pytest.approx(286.21441, abs=1e-5)


def test_the_nominal_mass_of_a_large_alkane_comes_from_its_formula() -> None:
    # C40H82: exact 562.642, nominal 562 (IUPAC terms: Murray et al., Pure Appl. Chem. 2013, 85, 1515).
    assert given_molecule("562.642", "C40H82").nominal_mass == 562
    assert given_molecule("562", "C40H82").nominal_mass == 562
    with pytest.raises(InvalidValueError, match="--formula"):
        given_molecule("562.642", None)


def test_an_exact_mass_that_fits_two_nominal_masses_is_asked_about() -> None:
    # C45H92: exact 632.720, nominal 632; 633 would be possible for another composition.
    with pytest.raises(InvalidValueError, match="--formula"):
        given_molecule("632.72", None)
    assert given_molecule("632.72", "C45H92").nominal_mass == 632


@pytest.mark.parametrize("formula", ["C9H17O2", "C2H40", "CH5"])
def test_a_formula_without_a_neutral_molecule_is_refused(formula: str) -> None:
    with pytest.raises(InvalidFormulaError, match="neutral molecule"):
        given_molecule(None, formula)


@pytest.mark.parametrize("mass", ["heavy", "", "-5", "0", "nan", "inf", "1e9", "2_86"])
def test_what_is_no_mass_is_refused(mass: str) -> None:
    with pytest.raises(InvalidValueError):
        given_molecule(mass, None)


@pytest.mark.parametrize(("mass", "formula"), [("285", "C16H30O4"), ("286.5", "C16H30O4"), ("287.2144", "C16H30O4")])
def test_mass_and_formula_must_agree(mass: str, formula: str) -> None:
    with pytest.raises(InvalidValueError):
        given_molecule(mass, formula)


def test_an_unreadable_formula_is_refused() -> None:
    with pytest.raises(InvalidFormulaError):
        given_molecule(None, "C16H30O4)")
