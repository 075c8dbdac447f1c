"""The checks of a carried proposal that need no structure: mass, formula, parity, isotopes, agreement of the donors."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

from speclib.annotation.satellites import MOSTLY_SATELLITE, Satellites
from speclib.chemistry.formula import Formula
from speclib.chemistry.isotopes import isotope_pattern
from speclib.chemistry.subformulae import can_be_an_ion, subformulae_of_nominal_mz
from speclib.model.assignment import Parity
from speclib.model.results import Check, DonorVote
from speclib.search.molecular_mass import IMPLAUSIBLE_LOSSES
from speclib.search.rows import Comparable

MASS, FORMULA, PARITY = "mass", "formula", "parity and nitrogen rule"
LOSS, ISOTOPES, DONORS = "neutral loss", "isotope satellites", "donors agree"
HARD = frozenset({MASS, FORMULA, PARITY, ISOTOPES})
"""Checks whose failure refuses a proposal; the others lower its confidence."""
ACCURATE_LIMIT_DA = 0.005
DECISIVE_PERCENT = 20.0
"""A missing satellite refuses a proposal from this height on (Cl 32 %, Br 97 %); weaker ones get lost in practice."""
AIR = frozenset({18, 28, 32, 40, 44})
"""m/z of water and air, which are often taken off; common practice, no source."""
VISIBLE_FACTOR = 3.0
"""A satellite must be predicted this many times above the smallest peak shown before its absence counts."""


@dataclass(frozen=True)
class Candidate:
    """A composition that donors vote for at one peak; `peak` is the position on whole m/z, `weight` the sum of
    votes.
    """

    peak: int
    mz: int
    formula: Formula
    mechanism: str
    donor_parity: Parity
    votes: tuple[DonorVote, ...]
    weight: float
    compounds: int


@dataclass(frozen=True, eq=False)
class CheckContext:
    """What a check may look at besides the candidate."""

    unknown: Comparable
    nominal_mass: int | None
    molecule: Formula | None
    satellites: Satellites
    rivals: tuple[Candidate, ...]


def is_hard(check: Check) -> bool:
    """Whether a failure of this check refuses the proposal."""
    return check.name in HARD


def failed_check(checks: Sequence[Check], matters: Callable[[Check], bool]) -> str | None:
    """Name of the first failed check that matters."""
    return next((check.name for check in checks if check.passed is False and matters(check)), None)


def check_candidate(candidate: Candidate, context: CheckContext) -> tuple[Check, ...]:
    """All checks, in the order in which they are shown."""
    return (
        _mass(candidate, context),
        _formula(candidate, context),
        _parity(candidate),
        _neutral_loss(candidate, context),
        _isotopes(candidate, context),
        _donors(candidate, context),
    )


def _mass(candidate: Candidate, context: CheckContext) -> Check:
    ion_mz = candidate.formula.ion_mz()
    position = int(context.unknown.nominal.position[candidate.peak])
    measured = float(context.unknown.spectrum.mz[position])
    if context.unknown.is_accurate:
        error = measured - ion_mz
        return Check(
            MASS,
            abs(error) <= ACCURATE_LIMIT_DA,
            f"measured {measured:.4f}, calculated {ion_mz:.4f} ({1000 * error:+.1f} mDa)",
        )
    return Check(MASS, True, f"nominal m/z {candidate.mz} is that of {candidate.formula}+ ({ion_mz:.4f})")


def _formula(candidate: Candidate, context: CheckContext) -> Check:
    ion = candidate.formula
    if not can_be_an_ion(ion):
        return Check(FORMULA, False, f"{ion} has more hydrogens or halogens than any ion can hold")
    if context.molecule is None:
        if context.nominal_mass is not None and ion.nominal_mass > context.nominal_mass:
            return Check(FORMULA, False, f"{ion} is heavier than the molecule (M {context.nominal_mass})")
        return Check(FORMULA, None, "the unknown's formula is not known")
    if not context.molecule.contains(ion):
        return Check(FORMULA, False, f"{ion} is not part of {context.molecule}")
    possible = subformulae_of_nominal_mz(context.molecule, candidate.mz)
    if len(possible) == 1:
        return Check(FORMULA, True, f"{ion} is the only composition of {context.molecule} at m/z {candidate.mz}")
    others = ", ".join(str(f) for f in possible if f != ion)
    return Check(FORMULA, True, f"{ion} is part of {context.molecule}; at m/z {candidate.mz} so is {others}")


def _parity(candidate: Candidate) -> Check:
    parity = candidate.formula.ion_parity
    nitrogen = candidate.formula["N"]
    words = f"{parity} ion at {'even' if candidate.mz % 2 == 0 else 'odd'} m/z with {nitrogen} N"
    if candidate.votes and parity != candidate.donor_parity.value:
        return Check(PARITY, False, f"{words}, but the donor's ion is {candidate.donor_parity.value}")
    return Check(PARITY, True, f"{words}, as in the donor")


def _neutral_loss(candidate: Candidate, context: CheckContext) -> Check:
    if context.molecule is not None and context.molecule.contains(candidate.formula):
        loss = context.molecule - candidate.formula
        mass, name = loss.nominal_mass, str(loss) or "nothing"
    elif context.nominal_mass is not None:
        mass = context.nominal_mass - candidate.mz
        name = f"{mass} mass units"
    else:
        return Check(LOSS, None, "the unknown's molecular mass is not known")
    if mass in IMPLAUSIBLE_LOSSES:
        return Check(LOSS, False, f"a loss of {name} ({mass}) from the molecular ion is implausible")
    return Check(LOSS, True, f"the molecular ion loses {name} ({mass})")


def _isotopes(candidate: Candidate, context: CheckContext) -> Check:
    peaks = context.unknown.nominal
    intensity = float(peaks.intensity[candidate.peak])
    share = context.satellites.share(candidate.peak, intensity)
    if share >= MOSTLY_SATELLITE:
        parent = int(peaks.mz[context.satellites.parent[candidate.peak]])
        return Check(ISOTOPES, False, f"{min(share, 1.0):.0%} of the peak is an isotope satellite of m/z {parent}")
    missing = _missing_satellite(candidate, context)
    if missing is not None:
        mz, percent = missing
        words = (
            f"{candidate.formula}+ should show a satellite of {percent:.0f} % at m/z {mz}; it is missing or far too low"
        )
        if percent >= DECISIVE_PERCENT:
            return Check(ISOTOPES, False, words)
        return Check(ISOTOPES, None, f"{words} (background taken off, or a trimmed peak list?)")
    return Check(ISOTOPES, True, f"isotopes of other ions account for {share:.0%} of the peak")


def _missing_satellite(candidate: Candidate, context: CheckContext) -> tuple[int, float] | None:
    """m/z and height in percent of the tallest satellite that should clearly show and does not."""
    peaks, measured = context.unknown.nominal, context.unknown.spectrum.measurement
    visible = max(float(peaks.intensity[peaks.intensity > 0].min()), measured.threshold or 0.0)
    heights = {int(m): float(i) for m, i in zip(peaks.mz, peaks.intensity, strict=True)}
    own = float(peaks.intensity[candidate.peak])
    missing: list[tuple[float, int]] = []
    for offset, percent in isotope_pattern(candidate.formula).items():
        mz, expected = candidate.mz + offset, own * percent / 100.0
        scanned = (measured.mz_from or 0.0) <= mz <= (measured.mz_to or float("inf"))
        low = expected > VISIBLE_FACTOR * visible and heights.get(mz, 0.0) < expected / VISIBLE_FACTOR
        if offset and scanned and low and mz not in AIR:
            missing.append((percent, mz))
    return (max(missing)[1], max(missing)[0]) if missing else None


def _donors(candidate: Candidate, context: CheckContext) -> Check:
    speaking = f"{candidate.compounds} compound{'s' if candidate.compounds != 1 else ''}"
    live = [rival for rival in context.rivals if context.molecule is None or context.molecule.contains(rival.formula)]
    if not live:
        return Check(DONORS, True, f"{speaking}, no other composition proposed")
    against = sum(rival.weight for rival in live)
    share = candidate.weight / (candidate.weight + against)
    others = ", ".join(str(rival.formula) for rival in live)
    return Check(DONORS, share >= 0.5, f"{speaking} with {share:.0%} of the vote; others say {others}")
