"""Which peaks of two spectra belong together.

Arrays are sorted by rising m/z. A pair matches when |m_a - (m_b + shift)| <= tolerance at the query's m/z. Greedy
assignment: candidates by falling product of weights, ties by lower m/z of a, then of b; each peak is used once.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from speclib.units import Tolerance

Array = NDArray[np.float64]
_ROUNDING = 1e-9
"""Slack for the last bit of a difference of two m/z, so that 43.1 - 43.0 <= 0.1 holds."""


@dataclass(frozen=True)
class PeakPair:
    """Peak `a` of the first spectrum matches peak `b` of the second; `shifted` when only after the mass shift."""

    a: int
    b: int
    shifted: bool = False


def candidate_pairs(mz_a: Array, mz_b: Array, tolerance: Tolerance, shift: float = 0.0) -> list[PeakPair]:
    """All pairs with |mz_a - (mz_b + shift)| within the tolerance, in order of a, then b."""
    moved = mz_b + shift
    width = np.array([tolerance.at(float(mz)) for mz in mz_a]) + _ROUNDING
    first = np.searchsorted(moved, mz_a - width, side="left")
    last = np.searchsorted(moved, mz_a + width, side="right")
    return [PeakPair(int(a), b, shift != 0.0) for a in np.flatnonzero(last > first) for b in range(first[a], last[a])]


def pair_peaks_greedy(
    candidates: Sequence[PeakPair], mz_a: Array, weight_a: Array, mz_b: Array, weight_b: Array
) -> list[PeakPair]:
    """One-to-one choice from `candidates`, best weight product first; pairs without weight are left out."""

    def rank(pair: PeakPair) -> tuple[float, float, float]:
        return (-float(weight_a[pair.a] * weight_b[pair.b]), float(mz_a[pair.a]), float(mz_b[pair.b]))

    used_a: set[int] = set()
    used_b: set[int] = set()
    chosen: list[PeakPair] = []
    for pair in sorted(candidates, key=rank):
        if weight_a[pair.a] * weight_b[pair.b] <= 0 or pair.a in used_a or pair.b in used_b:
            continue
        used_a.add(pair.a)
        used_b.add(pair.b)
        chosen.append(pair)
    return sorted(chosen, key=lambda pair: (pair.a, pair.b))
