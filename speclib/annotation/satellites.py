"""Which peaks of an unknown natural isotopes of other ions can account for."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from speclib.annotation.votes import Candidate
from speclib.chemistry.formula import Formula
from speclib.chemistry.isotopes import isotope_pattern
from speclib.cleaning.nominal import NominalPeaks

MOSTLY_SATELLITE = 0.5
"""Share of a peak that isotopes must account for before a proposal for it is refused. Common practice, no source."""
WEAKEST_PERCENT = 0.1


@dataclass(frozen=True)
class Satellites:
    """By whole m/z: the intensity that isotopes of other ions predict, and the m/z of the main parent."""

    predicted: dict[int, float]
    parent: dict[int, int]

    def share(self, mz: int, intensity: float) -> float:
        """Predicted part of the peak, 0 when nothing is predicted; can exceed 1."""
        return self.predicted.get(mz, 0.0) / intensity if intensity > 0 else 0.0


def predict_satellites(peaks: NominalPeaks, molecule: Formula | None, candidates: Sequence[Candidate]) -> Satellites:
    """Predict satellites upward through the spectrum; each ion counts with what its own parents leave of it.

    The formula of an ion is that of its strongest candidate; without one, the part of the `molecule` that its mass
    suggests. Satellites of B, Se, Ge, Sn, Hg, Pb and Fe lie on both sides of their ion.
    """
    best: dict[int, Candidate] = {}
    for candidate in candidates:
        if candidate.mz not in best or candidate.weight > best[candidate.mz].weight:
            best[candidate.mz] = candidate
    predicted: dict[int, float] = {}
    strongest: dict[int, tuple[float, int]] = {}
    for mz in (int(m) for m in peaks.mz):
        own = peaks.height(mz) - predicted.get(mz, 0.0)
        if own <= 0.0:
            continue
        formula = best[mz].formula if mz in best else _carbon_guess(mz, molecule)
        for offset, percent in isotope_pattern(formula).items():
            if offset and percent >= WEAKEST_PERCENT and peaks.height(mz + offset) > 0:
                part = own * percent / 100.0
                predicted[mz + offset] = predicted.get(mz + offset, 0.0) + part
                if part > strongest.get(mz + offset, (0.0, 0))[0]:
                    strongest[mz + offset] = (part, mz)
    return Satellites(predicted, {mz: parent for mz, (_, parent) in strongest.items()})


def _carbon_guess(mz: int, molecule: Formula | None) -> Formula:
    """Carbons of an ion without a formula: those of the molecule in proportion to mass, or one in 14 mass units."""
    if molecule is None or molecule.nominal_mass == 0:
        return Formula.of({"C": max(0, mz // 14)})
    return Formula.of({"C": min(molecule["C"], round(molecule["C"] * mz / molecule.nominal_mass))})
