"""Prediction of isotope satellites in an unknown."""

from __future__ import annotations

import pytest

from speclib.annotation.satellites import predict_satellites
from speclib.annotation.votes import Candidate
from speclib.chemistry.formula import parse_formula
from speclib.cleaning.nominal import bin_to_nominal_mass
from speclib.model.assignment import Parity
from speclib.model.spectrum import Spectrum


def voted(formula: str, weight: float = 1.0) -> Candidate:
    ion = parse_formula(formula)
    return Candidate(0, ion.nominal_mass, ion, "x", Parity(ion.ion_parity), (), weight, 1)


def test_carbon_satellite_is_one_percent_per_carbon() -> None:
    peaks = bin_to_nominal_mass(Spectrum.of([91, 92], [100, 10]))
    found = predict_satellites(peaks, None, [voted("C7H7")])
    # 7 x 1.0816 % + 7 x 0.0115 % (IUPAC 2013 abundances)
    assert found.predicted[92] == pytest.approx(7.65, abs=0.02)
    assert found.share(92, 10.0) == pytest.approx(0.765, abs=0.002)
    assert found.parent[92] == 91


def test_a_satellite_of_a_satellite_counts_only_what_is_the_ions_own() -> None:
    peaks = bin_to_nominal_mass(Spectrum.of([112, 113, 114], [100, 6.6, 32]))
    found = predict_satellites(peaks, None, [voted("C6H5Cl")])
    # m/z 113 is wholly a satellite, so it adds nothing to m/z 114: 32.0 % of Cl and 0.2 % of two 13C remain.
    assert found.predicted[114] == pytest.approx(32.2, abs=0.1)


def test_an_ion_without_candidate_is_taken_for_its_share_of_the_molecules_carbons() -> None:
    peaks = bin_to_nominal_mass(Spectrum.of([50, 51], [100, 10]))
    found = predict_satellites(peaks, parse_formula("C8H4"), [])
    assert found.predicted[51] == pytest.approx(4 * 1.0816, abs=0.01)


def test_the_strongest_candidate_gives_the_formula() -> None:
    peaks = bin_to_nominal_mass(Spectrum.of([43, 44], [100, 3]))
    votes = [voted("C2H3O", 0.4), voted("C3H7", 0.6)]
    assert predict_satellites(peaks, None, votes).predicted[44] == pytest.approx(3.33, abs=0.02)


def test_satellites_lie_on_both_sides_of_selenium_and_far_above_several_bromines() -> None:
    # Se: -2 47.9 % of 80Se; CBr4: +6 of the four bromines (IUPAC 2013 abundances, golden isotope patterns).
    selenium = bin_to_nominal_mass(Spectrum.of([108, 110], [48, 100]))
    assert predict_satellites(selenium, None, [voted("C2H6Se")]).predicted[108] == pytest.approx(48.3, abs=1.0)
    bromine = bin_to_nominal_mass(Spectrum.of([328, 330, 332, 334], [17, 68, 100, 65]))
    assert predict_satellites(bromine, None, [voted("CBr4")]).share(334, 65.0) > 0.9
