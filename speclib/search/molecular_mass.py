"""The molecular mass of an unknown from its spectrum alone: the highest plausible cluster.

Criteria of the molecular ion (McLafferty & Turecek 1993): highest cluster apart from isotopes, and no implausible
losses (4 to 14, 21 to 25) to the major peaks below it. Necessary, not sufficient: many classes show no molecular ion
at all.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from speclib.model.results import Estimate

IMPLAUSIBLE_LOSSES = frozenset({*range(4, 15), *range(21, 26)})
"""From M, counted between clusters; from memory of McLafferty & Turecek (1993)."""
NOISE = 1.0
"""Peaks below this relative intensity (base peak = 100) are not taken for a molecular ion's cluster."""
MAJOR = 10.0
C13_PER_CARBON = 1.0816
"""Percent of the reference peak; IUPAC 2013 abundances."""


def highest_plausible_cluster(mz: NDArray[np.float64], intensity: NDArray[np.float64]) -> Estimate:
    """Estimate the nominal molecular mass from whole m/z and intensities, shape `(n,)`.

    The value is None when no cluster is plausible; alternatives are the next plausible ones, without support numbers.
    """
    relative = 100.0 * intensity / intensity.max()
    heights = {int(m): float(r) for m, r in zip(mz, relative, strict=True) if r >= NOISE}
    monoisotopic = [m for m in sorted(heights, reverse=True) if not _is_satellite(m, heights)]
    major = [m for m in monoisotopic if heights[m] >= MAJOR]
    plausible = [m for m in monoisotopic if not any(m - lower in IMPLAUSIBLE_LOSSES for lower in major)]
    if not plausible:
        return Estimate(None, "no plausible molecular-ion cluster in the spectrum")
    alternatives = tuple((m, None) for m in plausible[1:4])
    return Estimate(plausible[0], "highest plausible cluster of the spectrum", alternatives)


def _is_satellite(m: int, heights: dict[int, float]) -> bool:
    """Whether natural isotopes of lower peaks can account for this one: 13C from m - 1, Cl or Br (or S, Si) from m -
    2.
    """
    from_one = heights.get(m - 1, 0.0) * (m - 1) / 12.0 * C13_PER_CARBON / 100.0
    one_below, two_below = heights.get(m - 1, 0.0), heights.get(m - 2, 0.0)
    if one_below and heights[m] <= 1.3 * from_one:
        return True
    # A halogen step leaves m - 1 low; the ratio fits one chlorine (32 %) or one bromine (97 %), or its falling sequel.
    ratio = heights[m] / two_below if two_below else float("inf")
    return one_below < 0.5 * heights[m] and ratio <= 1.05 and any(abs(ratio - r) <= 0.12 for r in (0.32, 0.65, 0.97))
