"""Prediction of isotope satellites in an unknown."""

from __future__ import annotations

from dataclasses import dataclass

import pytest

from speclib.annotation.satellites import predict_satellites
from speclib.chemistry.formula import Formula, parse_formula
from speclib.cleaning.nominal import bin_to_nominal_mass
from speclib.model.spectrum import Spectrum


@dataclass(frozen=True)
class Vote:
    peak: int
    formula: Formula
    weight: float = 1.0


def test_carbon_satellite_is_one_percent_per_carbon() -> None:
    peaks = bin_to_nominal_mass(Spectrum.of([91, 92], [100, 10]))
    found = predict_satellites(peaks, None, [Vote(0, parse_formula("C7H7"))])
    # 7 x 1.0816 % + 7 x 0.0115 % (IUPAC 2013 abundances)
    assert found.predicted[1] == pytest.approx(7.65, abs=0.02)
    assert found.share(1, 10.0) == pytest.approx(0.765, abs=0.002)
    assert found.parent[1] == 0


def test_a_satellite_of_a_satellite_counts_only_what_is_the_ions_own() -> None:
    peaks = bin_to_nominal_mass(Spectrum.of([112, 113, 114], [100, 6.6, 32]))
    found = predict_satellites(peaks, None, [Vote(0, parse_formula("C6H5Cl"))])
    # m/z 113 is wholly a satellite, so it adds nothing to m/z 114: 32.0 % of Cl and 0.2 % of two 13C remain.
    assert found.predicted[2] == pytest.approx(32.2, abs=0.1)


def test_an_ion_without_candidate_is_taken_for_its_share_of_the_molecules_carbons() -> None:
    peaks = bin_to_nominal_mass(Spectrum.of([50, 51], [100, 10]))
    found = predict_satellites(peaks, parse_formula("C8H4"), [])
    assert found.predicted[1] == pytest.approx(4 * 1.0816, abs=0.01)


def test_the_strongest_candidate_gives_the_formula() -> None:
    peaks = bin_to_nominal_mass(Spectrum.of([43, 44], [100, 3]))
    votes = [Vote(0, parse_formula("C2H3O"), 0.4), Vote(0, parse_formula("C3H7"), 0.6)]
    assert predict_satellites(peaks, None, votes).predicted[1] == pytest.approx(3.33, abs=0.02)
