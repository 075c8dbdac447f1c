"""Checks at the door: what is worth saying about a spectrum when it comes in."""

from __future__ import annotations

from collections.abc import Sequence

from speclib.chemistry.formula import Formula, parse_formula
from speclib.cleaning.nominal import bin_to_nominal_mass
from speclib.curation.spectrum_checks import (
    COMMON_PRACTICE,
    check_background,
    check_claimed_cas,
    check_few_peaks,
    check_peaks_above_molecule,
    check_saturation,
)
from speclib.errors import InvalidFormulaError
from speclib.model.entry import LibrarySpectrum
from speclib.model.finding import Finding, Severity
from speclib.model.spectrum import MassAccuracy, SourceSpectrum, Spectrum


def check_at_intake(
    found: SourceSpectrum, formula: Formula | None, same_peaks: Sequence[LibrarySpectrum], cas: str | None = None
) -> list[Finding]:
    """Findings on a spectrum that is about to be stored; `same_peaks` are held spectra with identical peaks."""
    findings = [Finding("reader", Severity.NOTE, note, "reader") for note in found.notes]
    findings += check_claimed_assignments(found)
    findings += check_scanned_range(found.spectrum)
    findings += check_unit_mass_boundaries(found.spectrum, formula)
    findings += check_claimed_formula(found, formula)
    findings += check_claimed_cas(found.cas, cas)
    peaks = bin_to_nominal_mass(found.spectrum, formula)
    findings += check_few_peaks(peaks)
    findings += check_peaks_above_molecule(peaks, formula)
    findings += check_saturation(peaks, formula)
    findings += check_background(peaks, formula)
    findings += [_identical(held) for held in same_peaks]
    return findings


def check_same_conditions(spectrum: Spectrum, siblings: Sequence[LibrarySpectrum]) -> list[Finding]:
    """References of one compound with different carrier gases or electron energies do not replicate each other."""
    findings = []
    for name, words in (("carrier_gas", "carrier gas"), ("electron_energy_ev", "electron energy")):
        ours = _plain(getattr(spectrum.measurement, name))
        others = {_plain(getattr(s.spectrum.measurement, name)) for s in siblings} - {None, ours}
        if ours is not None and others:
            listed = ", ".join(sorted(str(other) for other in others))
            reason = f"{words} is {ours} here, but {listed} in other references of the compound"
            findings.append(Finding("mixed conditions", Severity.DOUBT, reason, COMMON_PRACTICE))
    return findings


def _plain(value: object) -> object:
    """A value without regard to case and to the symbols of the common carrier gases."""
    if not isinstance(value, str):
        return value
    folded = value.strip().casefold()
    return {"he": "helium", "h2": "hydrogen", "n2": "nitrogen"}.get(folded, folded)


def check_claimed_assignments(found: SourceSpectrum) -> list[Finding]:
    """Assignments that the file itself carries are not taken over unseen."""
    if not found.assignments:
        return []
    first = found.assignments[0]
    reason = f"the file carries {len(found.assignments)} peak assignments of its own (m/z {first.mz:g}: {first.text}"
    return [
        Finding(
            "claimed assignments",
            Severity.NOTE,
            f"{reason} ...); they are not taken over: record those that convince you with `speclib assign`",
            COMMON_PRACTICE,
            tuple(claim.mz for claim in found.assignments),
        )
    ]


def _identical(held: LibrarySpectrum) -> Finding:
    """The same peaks under another name are a doubt; those of a held unknown are what a solved case looks like."""
    if held.compound is None:
        return Finding(
            "identical peaks", Severity.NOTE, f"these are the peaks of the unknown {held.label}", COMMON_PRACTICE
        )
    reason = f"every peak equals those of {held.label}: one of the two names may be wrong"
    return Finding("identical peaks", Severity.DOUBT, reason, COMMON_PRACTICE)


def check_scanned_range(spectrum: Spectrum) -> list[Finding]:
    """A scanned range that is not known counts as unlimited in every comparison."""
    measured = spectrum.measurement
    missing = [name for name in ("mz_from", "mz_to") if getattr(measured, name) is None]
    if not missing:
        return []
    return [
        Finding(
            "scanned range",
            Severity.DOUBT,
            f"{' and '.join(missing)} not given: the scanned range counts as unlimited, which can lower similarities",
            COMMON_PRACTICE,
        )
    ]


def check_unit_mass_boundaries(spectrum: Spectrum, formula: Formula | None) -> list[Finding]:
    """Fractional m/z of a unit-mass spectrum that could belong to either whole number."""
    if spectrum.mass_accuracy is not MassAccuracy.UNIT:
        return []
    assignment = bin_to_nominal_mass(spectrum, formula).assignment
    if not assignment.doubtful:
        return []
    doubtful = [(float(spectrum.mz[i]), int(assignment.unit_mz[i])) for i in assignment.doubtful]
    listed = ", ".join(f"{mz:g} (taken as {unit})" for mz, unit in doubtful[:8])
    more = f" and {len(doubtful) - 8} more" if len(doubtful) > 8 else ""
    return [
        Finding(
            "unit masses",
            Severity.DOUBT,
            f"m/z near the boundary between two whole numbers: {listed}{more}",
            "mass-defect line per spectrum (project rule)",
            tuple(mz for mz, _ in doubtful),
        )
    ]


def check_claimed_formula(found: SourceSpectrum, formula: Formula | None) -> list[Finding]:
    """The formula written in the file against that of the compound it is stored under."""
    if not found.formula or formula is None:
        return []
    try:
        claimed = parse_formula(found.formula)
    except InvalidFormulaError:
        return [
            Finding(
                "formula",
                Severity.NOTE,
                f"the file's formula {found.formula!r} cannot be read",
                COMMON_PRACTICE,
            )
        ]
    if claimed == formula:
        return []
    return [Finding("formula", Severity.FAULT, f"the file says {claimed}, the structure is {formula}", COMMON_PRACTICE)]
