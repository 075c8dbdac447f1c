"""The molecular mass of an unknown from its spectrum alone: the highest cluster, if it can be a molecular ion.

Criteria (McLafferty & Turecek 1993): the highest m/z apart from isotopes, and no implausible losses (4 to 14, 21 to
25) to the major peaks below it. Necessary, not sufficient: many classes show no molecular ion at all.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from speclib.chemistry.formula import Formula
from speclib.chemistry.isotopes import isotope_pattern
from speclib.model.results import Estimate

IMPLAUSIBLE_LOSSES = frozenset({*range(4, 15), *range(21, 26)})
"""From M, counted between clusters; from memory of McLafferty & Turecek (1993)."""
NOISE = 1.0
"""Peaks below this relative intensity (base peak = 100) are not taken for a molecular ion's cluster."""
MAJOR = 10.0
C13_PER_CARBON = 1.0816
SI29_PER_SILICON, SI30_PER_SILICON = 5.0801, 3.3527
"""Percent of the reference peak; IUPAC 2013 abundances."""
DALTON_PER_CARBON, DALTON_PER_SILICON = 12.0, 65.0
"""Mass that comes with a carbon at the least, and with a silicon in siloxanes and silyl ethers (73 or 74 a unit)."""
SLACK = 1.3
MOST_HALOGENS = 8
VISIBLE_MEMBER = 1.0
"""Percent of the reference peak that the member of a halogen pattern at the top must reach."""
LARGEST_MISFIT = 0.2
"""Of two clusters normalised to 1 each; common practice allows some per cent per peak, no source."""


def highest_plausible_cluster(mz: NDArray[np.float64], intensity: NDArray[np.float64]) -> Estimate:
    """Estimate the nominal molecular mass from whole m/z and intensities, shape `(n,)`.

    The value is None when the highest cluster loses what no molecular ion loses; the origin then says so.
    """
    relative = 100.0 * intensity / intensity.max()
    heights = {int(m): float(r) for m, r in zip(mz, relative, strict=True) if r >= NOISE}
    monoisotopic = [m for m in sorted(heights) if not _is_satellite(m, heights)]
    highest = _reference_of_halogen_cluster(monoisotopic[-1], heights)
    # A halogen cluster of a fragment counts with its reference only: its own satellites are no fragments.
    fragments = {_reference_of_halogen_cluster(m, heights) for m in monoisotopic if heights[m] >= MAJOR}
    losses = sorted(highest - m for m in fragments if highest - m in IMPLAUSIBLE_LOSSES)
    if losses:
        reason = (
            f"the highest cluster, m/z {highest}, is no molecular ion: m/z {highest - losses[-1]} would be a loss of"
        )
        return Estimate(None, f"{reason} {losses[-1]}", inferred=True)
    odd = "; an odd mass needs an odd number of N, or it is a fragment" if highest % 2 else ""
    return Estimate(highest, f"highest plausible cluster of the spectrum{odd}", inferred=True)


def _reference_of_halogen_cluster(top: int, heights: dict[int, float]) -> int:
    """The reference composition of a cluster of several Cl or Br that holds `top`: the m/z whose pattern fits best.

    With Br2, Br3, Cl4 and more it is not the tallest peak of its cluster. Without a pattern that fits, `top` itself.
    """
    best, best_misfit = top, LARGEST_MISFIT
    for reference in (top - 2 * step for step in range(MOST_HALOGENS + 1)):
        if reference not in heights:
            continue
        for chlorine in range(MOST_HALOGENS + 1):
            for bromine in range(MOST_HALOGENS + 1 - chlorine):
                if chlorine + bromine < 2:
                    continue
                pattern = isotope_pattern(Formula.of({"Cl": chlorine, "Br": bromine}))
                # The pattern has to reach the top, or it is that of a cluster further down.
                if pattern.get(top - reference, 0.0) < VISIBLE_MEMBER:
                    continue
                misfit = _misfit(reference, pattern, heights)
                if misfit < best_misfit:
                    best, best_misfit = reference, misfit
    return best


def _misfit(reference: int, pattern: dict[int, float], heights: dict[int, float]) -> float:
    """Sum of differences of two normalised clusters in steps of 2, one step beyond the pattern on either side."""
    offsets = range(-2, max(pattern) + 3, 2)
    seen = np.array([heights.get(reference + offset, 0.0) for offset in offsets])
    expected = np.array([pattern.get(offset, 0.0) for offset in offsets])
    return float(np.abs(seen / seen.sum() - expected / expected.sum()).sum())


def _is_satellite(m: int, heights: dict[int, float]) -> bool:
    """Whether natural isotopes of lower peaks can account for this one.

    13C and 29Si from m - 1; 30Si, Cl, Br and their sequels from m - 2.
    """
    one_below, two_below = heights.get(m - 1, 0.0), heights.get(m - 2, 0.0)
    carbon = (m - 1) / DALTON_PER_CARBON * C13_PER_CARBON
    silicon = (m - 1) / DALTON_PER_SILICON
    if one_below and heights[m] <= SLACK * one_below * max(carbon, silicon * SI29_PER_SILICON) / 100.0:
        return True
    second_silicon = silicon * SI30_PER_SILICON + (silicon * SI29_PER_SILICON) ** 2 / 200.0
    if two_below and heights[m] <= SLACK * two_below * second_silicon / 100.0:
        return True
    # A halogen step leaves m - 1 low; the ratio fits one chlorine (32 %) or one bromine (97 %), or its falling sequel.
    ratio = heights[m] / two_below if two_below else float("inf")
    return one_below < 0.5 * heights[m] and ratio <= 1.05 and any(abs(ratio - r) <= 0.12 for r in (0.32, 0.65, 0.97))
