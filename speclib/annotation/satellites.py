"""Which peaks of an unknown natural isotopes of other peaks can account for."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Protocol

from speclib.chemistry.formula import Formula
from speclib.chemistry.isotopes import isotope_pattern
from speclib.cleaning.nominal import NominalPeaks

MOSTLY_SATELLITE = 0.5
"""Share of a peak that isotopes must account for before a proposal for it is refused. Common practice, no source."""
MOST_SATELLITES = 4


class Voted(Protocol):
    """What is needed of a candidate."""

    @property
    def peak(self) -> int:
        """Position on whole m/z."""

    @property
    def formula(self) -> Formula:
        """Ion formula."""

    @property
    def weight(self) -> float:
        """Sum of its votes."""


@dataclass(frozen=True)
class Satellites:
    """Per position on whole m/z: intensity that isotopes of lower ions predict, and the position of the main parent."""

    predicted: dict[int, float]
    parent: dict[int, int]

    def share(self, position: int, intensity: float) -> float:
        """Predicted part of the peak, 0 when nothing is predicted; can exceed 1."""
        return self.predicted.get(position, 0.0) / intensity if intensity > 0 else 0.0


def predict_satellites(peaks: NominalPeaks, molecule: Formula | None, candidates: Sequence[Voted]) -> Satellites:
    """Predict satellites upward through the spectrum; each ion counts with what its own parents leave of it.

    The formula of an ion is that of its strongest candidate; without one, the part of the `molecule` that its mass
    suggests.
    """
    best: dict[int, tuple[float, Formula]] = {}
    for candidate in candidates:
        if candidate.weight > best.get(candidate.peak, (0.0, candidate.formula))[0]:
            best[candidate.peak] = (candidate.weight, candidate.formula)
    place = {int(m): i for i, m in enumerate(peaks.mz)}
    predicted: dict[int, float] = {}
    strongest: dict[int, tuple[float, int]] = {}
    for position, mz in enumerate(peaks.mz):
        own = float(peaks.intensity[position]) - predicted.get(position, 0.0)
        if own <= 0.0:
            continue
        formula = best[position][1] if position in best else _carbon_guess(int(mz), molecule)
        for offset, height in isotope_pattern(formula).items():
            other = place.get(int(mz) + offset)
            if 0 < offset <= MOST_SATELLITES and other is not None:
                part = own * height / 100.0
                predicted[other] = predicted.get(other, 0.0) + part
                if part > strongest.get(other, (0.0, 0))[0]:
                    strongest[other] = (part, position)
    return Satellites(predicted, {other: parent for other, (_, parent) in strongest.items()})


def _carbon_guess(mz: int, molecule: Formula | None) -> Formula:
    """Carbons of an ion without a formula: those of the molecule in proportion to mass, or one in 14 mass units."""
    if molecule is None or molecule.nominal_mass == 0:
        return Formula.of({"C": max(0, mz // 14)})
    return Formula.of({"C": min(molecule["C"], round(molecule["C"] * mz / molecule.nominal_mass))})
