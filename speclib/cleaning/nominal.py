"""Peaks of a spectrum on whole m/z, with the positions they come from."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from speclib.chemistry.formula import Formula
from speclib.chemistry.unit_mass import UnitMassAssignment, assign_unit_masses
from speclib.model.spectrum import Spectrum


@dataclass(frozen=True, eq=False)
class NominalPeaks:
    """Whole m/z (float64, strictly rising), summed intensities, and per m/z the tallest original peak's position."""

    mz: NDArray[np.float64]
    intensity: NDArray[np.float64]
    position: NDArray[np.int64]
    assignment: UnitMassAssignment

    def height(self, mz: int) -> float:
        """Intensity at a whole m/z, 0 where there is no peak."""
        i = int(np.searchsorted(self.mz, mz))
        return float(self.intensity[i]) if i < len(self.mz) and self.mz[i] == mz else 0.0


def bin_to_nominal_mass(spectrum: Spectrum, formula: Formula | None = None) -> NominalPeaks:
    """Put a spectrum on whole m/z; peaks that fall on the same one are added up.

    A known molecular `formula` decides peaks near a boundary (see `chemistry.unit_mass`).
    """
    assignment = assign_unit_masses(spectrum.mz, spectrum.intensity, formula)
    unit = assignment.unit_mz
    whole, group = np.unique(unit, return_inverse=True)
    if len(whole) == len(unit):
        return NominalPeaks(
            whole.astype(np.float64), spectrum.intensity[np.argsort(unit)], np.argsort(unit), assignment
        )
    total = np.bincount(group, weights=spectrum.intensity).astype(np.float64)
    tallest = np.zeros(len(whole), dtype=np.int64)
    for position in np.argsort(spectrum.intensity, kind="stable"):
        tallest[group[position]] = position
    return NominalPeaks(whole.astype(np.float64), total, tallest, assignment)
