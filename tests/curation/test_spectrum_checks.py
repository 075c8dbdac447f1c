"""Checks of a spectrum against its compound."""

from __future__ import annotations

from speclib.chemistry.formula import parse_formula
from speclib.cleaning.nominal import NominalPeaks, bin_to_nominal_mass
from speclib.curation.spectrum_checks import (
    check_background,
    check_claimed_cas,
    check_few_peaks,
    check_peaks_above_molecule,
    check_saturation,
)
from speclib.model.spectrum import Spectrum


def peaks(heights: dict[int, float]) -> NominalPeaks:
    return bin_to_nominal_mass(Spectrum.of(sorted(heights), [heights[m] for m in sorted(heights)]))


NAPHTHALENE = parse_formula("C10H8")


def test_a_handful_of_peaks_is_a_doubt() -> None:
    assert check_few_peaks(peaks({43: 100, 58: 50, 71: 5, 85: 5})) != []
    assert check_few_peaks(peaks({43: 100, 58: 50, 71: 5, 85: 5, 100: 5})) == []


def test_isotopes_of_the_molecular_ion_are_no_finding_and_other_peaks_above_it_are() -> None:
    # C10H8: M+1 is 10.9 % of M, M+2 0.5 % (IUPAC 2013 abundances)
    clean = {102: 8.0, 127: 13.0, 128: 100.0, 129: 11.0, 130: 0.6}
    assert check_peaks_above_molecule(peaks(clean), NAPHTHALENE) == []
    (finding,) = check_peaks_above_molecule(peaks({**clean, 149: 30.0}), NAPHTHALENE)
    assert finding.peaks == (149.0,)


def test_a_chlorine_pattern_above_the_molecular_ion_is_no_finding() -> None:
    chlorobenzene = peaks({77: 60.0, 112: 100.0, 113: 6.7, 114: 32.5, 115: 2.1})
    assert check_peaks_above_molecule(chlorobenzene, parse_formula("C6H5Cl")) == []


def test_a_protonated_molecule_is_named_as_a_possibility() -> None:
    (finding,) = check_peaks_above_molecule(peaks({43: 100.0, 100: 5.0, 101: 9.0}), parse_formula("C6H12O"))
    assert "[M+H]+" in finding.reason


def test_a_satellite_too_high_for_a_base_peak_that_is_the_molecular_ion_means_saturation() -> None:
    assert check_saturation(peaks({127: 13.0, 128: 100.0, 129: 11.0}), NAPHTHALENE) == []
    (finding,) = check_saturation(peaks({127: 20.0, 128: 100.0, 129: 24.0}), NAPHTHALENE)
    assert "24 %" in finding.reason
    # Toluene's m/z 92 beside the base peak 91 is the molecular ion, no satellite.
    assert check_saturation(peaks({91: 100.0, 92: 65.0}), parse_formula("C7H8")) == []


def test_bleed_is_background_unless_the_compound_is_a_siloxane() -> None:
    seen = peaks({73: 20.0, 128: 100.0, 207: 10.0, 281: 5.0})
    (finding,) = check_background(seen, NAPHTHALENE)
    assert finding.peaks == (207.0, 281.0)
    assert check_background(seen, parse_formula("C8H24O4Si4")) == []


def test_another_cas_number_in_the_file_is_a_doubt() -> None:
    assert check_claimed_cas("91-20-3", "91-20-3") == []
    assert check_claimed_cas(None, "91-20-3") == []
    assert "66-25-1" in check_claimed_cas("66-25-1", "91-20-3")[0].reason
