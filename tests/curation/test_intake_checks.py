"""Checks at the door."""

from __future__ import annotations

from dataclasses import replace

from speclib.chemistry.formula import parse_formula
from speclib.curation.intake_checks import check_at_intake
from speclib.model.finding import Severity
from speclib.model.spectrum import ClaimedAssignment, MassAccuracy, Measurement, SourceSpectrum, Spectrum

RANGE = Measurement(mz_from=20, mz_to=400)
PLAIN = SourceSpectrum("a.txt", 1, Spectrum.of([26, 27, 39, 42, 43, 58], [5, 8, 5, 7, 100, 50], measurement=RANGE))


def test_a_plain_spectrum_has_no_findings() -> None:
    assert check_at_intake(PLAIN, parse_formula("C3H6O"), ()) == []


def test_a_missing_scanned_range_is_a_doubt() -> None:
    bare = replace(PLAIN, spectrum=replace(PLAIN.spectrum, measurement=Measurement(mz_from=20)))
    (finding,) = check_at_intake(bare, None, ())
    assert finding.severity is Severity.DOUBT
    assert finding.reason.startswith("mz_to not given")


def test_a_file_that_states_another_formula_is_a_fault() -> None:
    (finding,) = check_at_intake(replace(PLAIN, formula="C 3 H 8 O 1"), parse_formula("C3H6O"), ())
    assert finding.severity is Severity.FAULT
    assert "C3H8O" in finding.reason
    assert check_at_intake(replace(PLAIN, formula="C 3 H 6 O"), parse_formula("C3H6O"), ()) == []


def test_an_unreadable_formula_in_the_file_is_noted_only() -> None:
    (finding,) = check_at_intake(replace(PLAIN, formula="unknown"), parse_formula("C3H6O"), ())
    assert finding.severity is Severity.NOTE


def test_peaks_near_the_boundary_of_two_whole_numbers_are_a_doubt_unless_the_formula_decides() -> None:
    # A bromine compound (m/z falls below the whole number) on a hydrocarbon background (m/z rises above it).
    mz = [43.05, 57.07, 71.09, 85.10, 169.46, 245.78, 327.77]
    found = replace(PLAIN, spectrum=Spectrum.of(mz, [10, 10, 10, 10, 100, 30, 80], measurement=RANGE))
    findings = [f for f in check_at_intake(found, None, ()) if f.check == "unit masses"]
    assert [f.severity for f in findings] == [Severity.DOUBT]
    assert 169.46 in findings[0].peaks


def test_accurate_mass_is_not_put_on_whole_numbers() -> None:
    accurate = Spectrum.of([26.4, 27.5, 39.4, 42.5, 43.4, 58.5], [5, 8, 5, 7, 100, 50], MassAccuracy.ACCURATE, RANGE)
    assert check_at_intake(replace(PLAIN, spectrum=accurate), None, ()) == []


def test_remarks_of_the_reader_become_notes() -> None:
    (finding,) = check_at_intake(replace(PLAIN, notes=("read as cp1252",)), None, ())
    assert (finding.severity, finding.reason) == (Severity.NOTE, "read as cp1252")


def test_assignments_in_the_file_are_noted_and_not_taken_over() -> None:
    claimed = replace(PLAIN, assignments=(ClaimedAssignment(43.0, 100.0, "f{C2H3O}"),))
    (finding,) = check_at_intake(claimed, None, ())
    assert finding.severity is Severity.NOTE
    assert "1 peak assignments of its own (m/z 43: f{C2H3O}" in finding.reason
