"""The element table against molmass and pyteomics."""

from __future__ import annotations

import molmass
import pytest
from pyteomics import mass as pyteomics_mass

from speclib.chemistry.elements import ELECTRON_MASS, ELEMENTS

ISOTOPES = [
    (symbol, number, mass, abundance)
    for symbol, element in ELEMENTS.items()
    if symbol != "D"
    for number, mass, abundance in element.isotopes
]
PACKAGES_AGREE = 5e-7


@pytest.mark.parametrize(("symbol", "number", "mass", "abundance"), ISOTOPES, ids=lambda v: str(v))
def test_masses_equal_both_packages_where_they_agree(symbol: str, number: int, mass: float, abundance: float) -> None:
    in_molmass = molmass.ELEMENTS[symbol].isotopes[number].mass
    in_pyteomics = pyteomics_mass.nist_mass[symbol][number][0]
    if abs(in_molmass - in_pyteomics) <= PACKAGES_AGREE:
        assert mass == pytest.approx(in_molmass, abs=1e-6)
        assert mass == pytest.approx(in_pyteomics, abs=1e-6)
    else:
        # Older mass evaluations: they differ from each other by up to 7e-6 (120Sn), from AME2020 by up to 8e-6.
        assert mass == pytest.approx(in_molmass, abs=3e-6)
        assert mass == pytest.approx(in_pyteomics, abs=1e-5)


@pytest.mark.parametrize(("symbol", "number", "mass", "abundance"), ISOTOPES, ids=lambda v: str(v))
def test_abundances_equal_both_packages(symbol: str, number: int, mass: float, abundance: float) -> None:
    # Ge was revised in 2013 and both packages carry older values.
    slack = 2.1e-3 if symbol == "Ge" else 1e-6
    assert abundance == pytest.approx(molmass.ELEMENTS[symbol].isotopes[number].abundance, abs=slack)
    assert abundance == pytest.approx(pyteomics_mass.nist_mass[symbol][number][1], abs=slack)


@pytest.mark.parametrize("symbol", list(ELEMENTS))
def test_each_element_is_complete(symbol: str) -> None:
    element = ELEMENTS[symbol]
    numbers = [number for number, _, _ in element.isotopes]
    assert numbers == sorted(set(numbers))
    assert sum(abundance for _, _, abundance in element.isotopes) == pytest.approx(1.0, abs=1e-9)
    assert all(abs(mass - number) < 0.11 for number, mass, _ in element.isotopes)
    if symbol != "D":
        natural = {n for n, isotope in molmass.ELEMENTS[symbol].isotopes.items() if isotope.abundance > 0}
        assert set(numbers) == natural


@pytest.mark.parametrize(
    ("symbol", "number"),
    [
        ("B", 11),
        ("Fe", 56),
        ("Ge", 74),
        ("Se", 80),
        ("Sn", 120),
        ("Hg", 202),
        ("Pb", 208),
        ("Br", 79),
        ("Cl", 35),
        ("D", 2),
    ],
)
def test_the_reference_isotope_is_the_most_abundant(symbol: str, number: int) -> None:
    assert ELEMENTS[symbol].nominal_mass == number


def test_electron_mass() -> None:
    # pyteomics ships 0.00054857990943
    assert pytest.approx(pyteomics_mass.nist_mass["e*"][0][0], abs=1e-11) == ELECTRON_MASS
