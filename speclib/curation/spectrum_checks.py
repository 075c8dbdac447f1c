"""Checks of a spectrum against its compound that need chemistry: findings in words, none of which blocks by itself."""

from __future__ import annotations

from speclib.chemistry.formula import Formula
from speclib.chemistry.isotopes import isotope_pattern
from speclib.chemistry.subformulae import plausible_ions
from speclib.cleaning.nominal import NominalPeaks
from speclib.model.finding import Finding, Severity

COMMON_PRACTICE = "common practice, no source"
FEWEST_PEAKS = 5
VISIBLE = 2.0
"""Relative intensity (base peak = 100) below which a peak is not worth a finding."""
RATIO_SLACK, ABSOLUTE_SLACK = 1.3, 2.0
"""How much taller than predicted a satellite of a quadrupole may stand: factor, and percent of its ion."""
BACKGROUND: dict[int, tuple[str, str]] = {
    207: ("C5H15O3Si3", "column bleed"),
    281: ("C7H21O4Si4", "column bleed"),
    355: ("C9H27O5Si5", "column bleed"),
}
"""m/z, ion and origin of the commonest background; from memory, common practice.

Air is left out: its ions coincide with fragments of most compounds.
"""


def check_few_peaks(peaks: NominalPeaks) -> list[Finding]:
    """A spectrum of a handful of peaks matches many others."""
    count = int((peaks.intensity > 0).sum())
    if count >= FEWEST_PEAKS:
        return []
    reason = f"only {count} peaks: similarities to so few say little"
    return [Finding("peak count", Severity.DOUBT, reason, COMMON_PRACTICE)]


def check_peaks_above_molecule(peaks: NominalPeaks, formula: Formula | None) -> list[Finding]:
    """Peaks above the molecular ion that its isotopes do not explain: an impurity, background or a wrong structure."""
    if formula is None:
        return []
    mass, top = formula.nominal_mass, float(peaks.intensity.max())
    pattern = isotope_pattern(formula)
    above = []
    for mz in (int(m) for m in peaks.mz if m > mass):
        expected = peaks.height(mass) * pattern.get(mz - mass, 0.0) / 100.0
        if peaks.height(mz) > RATIO_SLACK * expected + VISIBLE * top / 100.0:
            above.append(mz)
    if not above:
        return []
    listed = ", ".join(str(mz) for mz in above[:6]) + (f" and {len(above) - 6} more" if len(above) > 6 else "")
    reason = f"m/z {listed} lie above the molecular ion ({mass}) and are no isotopes of it"
    if above == [mass + 1]:
        reason += "; [M+H]+ at high pressure looks like this"
    source = "McLafferty & Turecek 1993, criteria of the molecular ion (from memory)"
    return [Finding("peaks above M", Severity.DOUBT, reason, source, tuple(float(mz) for mz in above))]


def check_saturation(peaks: NominalPeaks, formula: Formula | None) -> list[Finding]:
    """A molecular ion that is the base peak with satellites far too high for it: the detector was saturated.

    Only there the sign is safe: next to any other base peak another fragment may stand.
    """
    if formula is None or peaks.height(formula.nominal_mass) < float(peaks.intensity.max()):
        return []
    mass = formula.nominal_mass
    own = peaks.height(mass)
    high = []
    for offset, percent in isotope_pattern(formula).items():
        seen = 100.0 * peaks.height(mass + offset) / own
        if offset > 0 and percent >= 1.0 and seen > RATIO_SLACK * percent + ABSOLUTE_SLACK:
            high.append((mass + offset, seen, percent))
    if not high:
        return []
    mz, seen, percent = high[0]
    reason = f"the satellite at m/z {mz} is {seen:.0f} % of the base peak, {percent:.0f} % were expected: saturated?"
    return [Finding("saturation", Severity.DOUBT, reason, COMMON_PRACTICE, (float(mass), float(mz)))]


def check_background(peaks: NominalPeaks, formula: Formula | None) -> list[Finding]:
    """Common background ions that the compound itself cannot give."""
    if formula is None:
        return []
    top = float(peaks.intensity.max())
    found = []
    for mz, (ion, origin) in BACKGROUND.items():
        if peaks.height(mz) >= VISIBLE * top / 100.0 and not plausible_ions(formula, mz):
            found.append((mz, f"m/z {mz} ({ion}, {origin})"))
    if not found:
        return []
    reason = f"background ions: {', '.join(words for _, words in found)}"
    return [Finding("background", Severity.NOTE, reason, COMMON_PRACTICE, tuple(float(mz) for mz, _ in found))]


def check_claimed_cas(claimed: str | None, cas: str | None) -> list[Finding]:
    """The CAS number written in the file against that of the compound."""
    if not claimed or not cas or claimed.strip() == cas:
        return []
    reason = f"the file says CAS {claimed.strip()}, the compound has {cas}"
    return [Finding("CAS number", Severity.DOUBT, reason, COMMON_PRACTICE)]
