"""The checks of a carried proposal that need no structure: mass, formula, parity, isotopes, agreement of the donors."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from speclib.annotation.satellites import MOSTLY_SATELLITE, Satellites
from speclib.annotation.votes import ACCURATE_LIMIT_DA, Candidate, Unknown
from speclib.chemistry.formula import Formula
from speclib.chemistry.isotopes import isotope_pattern
from speclib.chemistry.subformulae import can_be_an_ion, plausible_ions
from speclib.model.results import Check
from speclib.search.molecular_mass import IMPLAUSIBLE_LOSSES

MASS, FORMULA, PARITY = "mass", "formula", "parity and nitrogen rule"
LOSS, ISOTOPES, DONORS = "neutral loss", "isotope satellites", "donors agree"
DECISIVE_PERCENT = 20.0
"""A missing satellite refuses a proposal from this height on (Cl 32 %, Br 97 %); weaker ones get lost in practice."""
AIR = frozenset({18, 28, 32, 40, 44})
"""m/z of water and air, which are often taken off; common practice, no source."""
VISIBLE_FACTOR = 3.0
"""A satellite must be predicted this many times above the smallest peak shown before its absence counts."""


@dataclass(frozen=True, eq=False)
class CheckContext:
    """What a check may look at besides the candidate."""

    unknown: Unknown
    satellites: Satellites


def first_refusal(checks: Sequence[Check]) -> str | None:
    """Name of the first check that refuses the proposal, or None."""
    return next((check.name for check in checks if check.passed is False and check.refuses), None)


def fits_molecule(candidate: Candidate, unknown: Unknown) -> bool:
    """Whether the composition can be an ion of the unknown as far as its molecule is known."""
    return _formula(candidate, unknown).passed is not False


def other_compositions(candidate: Candidate, unknown: Unknown) -> list[Formula]:
    """Plausible ions of the molecule that could be the peak instead; for accurate mass, within the limit."""
    if unknown.formula is None:
        return []
    others = [f for f in plausible_ions(unknown.formula, candidate.mz) if f != candidate.formula]
    if unknown.comparable.is_accurate:
        measured = float(unknown.comparable.spectrum.mz[candidate.peak])
        others = [f for f in others if abs(f.ion_mz() - measured) <= ACCURATE_LIMIT_DA]
    return others


def check_candidate(candidate: Candidate, context: CheckContext) -> tuple[Check, ...]:
    """The checks that look at one candidate alone, in the order in which they are shown."""
    return (
        _mass(candidate, context),
        _formula(candidate, context.unknown),
        _parity(candidate),
        _neutral_loss(candidate, context.unknown),
        _isotopes(candidate, context),
    )


def _mass(candidate: Candidate, context: CheckContext) -> Check:
    ion_mz = candidate.formula.ion_mz()
    comparable = context.unknown.comparable
    if comparable.is_accurate:
        measured = float(comparable.spectrum.mz[candidate.peak])
        error = measured - ion_mz
        words = f"measured {measured:.4f}, calculated {ion_mz:.4f} ({1000 * error:+.1f} mDa)"
        return Check(MASS, abs(error) <= ACCURATE_LIMIT_DA, words, refuses=True)
    return Check(MASS, True, f"nominal m/z {candidate.mz} is that of {candidate.formula}+ ({ion_mz:.4f})")


def _formula(candidate: Candidate, unknown: Unknown) -> Check:
    ion, molecule = candidate.formula, unknown.formula
    if not can_be_an_ion(ion):
        words = f"{ion} has more hydrogens or halogens than any ion can hold"
        return Check(FORMULA, False, words, refuses=True)
    if molecule is None:
        if unknown.nominal_mass is not None and ion.nominal_mass > unknown.nominal_mass:
            origin = "" if unknown.mass_is_given else ", inferred"
            words = f"{ion} is heavier than the molecule (M {unknown.nominal_mass}{origin})"
            # The peak disproves an inferred mass rather than the other way round.
            return Check(FORMULA, False, words, refuses=unknown.mass_is_given)
        return Check(FORMULA, None, "the unknown's formula is not known")
    if not molecule.contains(ion):
        return Check(FORMULA, False, f"{ion} is not part of {molecule}", refuses=True)
    if ion != molecule and ion not in plausible_ions(molecule, candidate.mz):
        return Check(FORMULA, False, f"{ion} is far more unsaturated than {molecule}", refuses=True)
    others = ", ".join(str(f) for f in other_compositions(candidate, unknown))
    if not others:
        return Check(FORMULA, True, f"{ion} is the only plausible composition of {molecule} at m/z {candidate.mz}")
    return Check(FORMULA, True, f"{ion} is part of {molecule}; at m/z {candidate.mz} so is {others}")


def _parity(candidate: Candidate) -> Check:
    """The nitrogen rule ties parity, m/z and nitrogen count; left to check is that the donor's record obeys it."""
    parity = candidate.formula.ion_parity
    words = f"{parity} ion at {'even' if candidate.mz % 2 == 0 else 'odd'} m/z with {candidate.formula['N']} N"
    if parity != candidate.donor_parity.value:
        return Check(PARITY, False, f"{words}, but the donor's ion is {candidate.donor_parity.value}", refuses=True)
    return Check(PARITY, True, f"{words}, as in the donor")


def _neutral_loss(candidate: Candidate, unknown: Unknown) -> Check:
    if unknown.formula is not None and unknown.formula.contains(candidate.formula):
        loss = unknown.formula - candidate.formula
        mass, name = loss.nominal_mass, str(loss) or "nothing"
    elif unknown.nominal_mass is not None:
        mass = unknown.nominal_mass - candidate.mz
        name = f"{mass} mass units"
    else:
        return Check(LOSS, None, "the unknown's molecular mass is not known")
    if mass < 0:
        return Check(LOSS, False, f"m/z {candidate.mz} lies above the molecular mass {unknown.nominal_mass}")
    if mass in IMPLAUSIBLE_LOSSES:
        return Check(LOSS, False, f"a loss of {name} ({mass}) from the molecular ion is implausible")
    return Check(LOSS, True, f"the molecular ion loses {name} ({mass})")


def _isotopes(candidate: Candidate, context: CheckContext) -> Check:
    height = context.unknown.comparable.nominal.height(candidate.mz)
    share = context.satellites.share(candidate.mz, height)
    if share >= MOSTLY_SATELLITE:
        parent = context.satellites.parent[candidate.mz]
        words = f"{min(share, 1.0):.0%} of the peak is an isotope satellite of m/z {parent}"
        return Check(ISOTOPES, False, words, refuses=True)
    missing = _missing_satellite(candidate, context)
    if missing is not None:
        mz, percent = missing
        ion = f"{candidate.formula}+"
        words = f"{ion} should show a satellite of {percent:.0f} % at m/z {mz}; it is missing or far too low"
        if percent >= DECISIVE_PERCENT:
            return Check(ISOTOPES, False, words, refuses=True)
        return Check(ISOTOPES, None, f"{words} (background taken off, or a trimmed peak list?)")
    return Check(ISOTOPES, True, f"isotopes of other ions account for {share:.0%} of the peak")


def _missing_satellite(candidate: Candidate, context: CheckContext) -> tuple[int, float] | None:
    """m/z and height in percent of the tallest satellite that should clearly show and does not."""
    peaks, measured = context.unknown.comparable.nominal, context.unknown.comparable.spectrum.measurement
    visible = max(float(peaks.intensity[peaks.intensity > 0].min()), measured.threshold or 0.0)
    own = peaks.height(candidate.mz)
    missing: list[tuple[float, int]] = []
    for offset, percent in isotope_pattern(candidate.formula).items():
        mz, expected = candidate.mz + offset, own * percent / 100.0
        scanned = (measured.mz_from or 0.0) <= mz <= (measured.mz_to or float("inf"))
        low = expected > VISIBLE_FACTOR * visible and peaks.height(mz) < expected / VISIBLE_FACTOR
        if offset and scanned and low and mz not in AIR:
            missing.append((percent, mz))
    return (max(missing)[1], max(missing)[0]) if missing else None


def check_agreement(candidate: Candidate, rivals: Sequence[Candidate]) -> Check:
    """Whether the donors agree; `rivals` are the other compositions of the peak that no check refused."""
    speaking = f"{candidate.compounds} compound{'s' if candidate.compounds != 1 else ''}"
    if not rivals:
        return Check(DONORS, True, f"{speaking}, no other composition proposed")
    share = candidate.weight / (candidate.weight + sum(rival.weight for rival in rivals))
    others = ", ".join(str(rival.formula) for rival in rivals)
    return Check(DONORS, share >= 0.5, f"{speaking} with {share:.0%} of the vote; others say {others}")
