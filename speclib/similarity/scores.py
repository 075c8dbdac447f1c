"""Weighted cosine, neutral-loss and shifted similarity, forward and reverse, over the range that both spectra scanned.

Definitions: weighted cosine (Stein & Scott, J. Am. Soc. Mass Spectrom. 1994, 5, 859); reverse: Abramson, Anal. Chem.
1975, 47, 45; neutral loss: Aisporna et al., J. Am. Soc. Mass Spectrom. 2022, 33, 530; shifted: modified cosine,
Watrous et al., Proc. Natl. Acad. Sci. USA 2012, 109, E1743, with greedy assignment. Scores lie between 0 and 1; norms
run over all peaks of the range.
"""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum

import numpy as np
from numpy.typing import NDArray

from speclib.errors import InvalidValueError
from speclib.similarity.pairing import PeakPair, candidate_pairs, pair_peaks_greedy
from speclib.similarity.weights import DEFAULT_WEIGHTING, Weighting
from speclib.units import UNIT_MASS_TOLERANCE, Tolerance

Array = NDArray[np.float64]


_ZERO_LOSS = 0.5
"""Losses below this (Da) are none: half of H, the smallest. The molecular ion lies an electron mass below M."""


class Measure(StrEnum):
    """The similarity measures."""

    COSINE = "cosine"
    LOSS = "loss"
    SHIFTED = "shifted"


@dataclass(frozen=True, eq=False)
class Peaks:
    """What a score needs of a spectrum: sorted arrays of shape `(n,)`, molecular mass (Da) and scanned range if
    known.
    """

    mz: Array
    intensity: Array
    molecular_mass: float | None = None
    mz_from: float | None = None
    mz_to: float | None = None

    @property
    def scanned(self) -> tuple[float, float]:
        """Scanned m/z range; a limit that is not known counts as unlimited."""
        low = float("-inf") if self.mz_from is None else self.mz_from
        return low, float("inf") if self.mz_to is None else self.mz_to

    def within(self, low: float, high: float) -> tuple[Array, NDArray[np.int64]]:
        """m/z of the peaks inside [low, high] that have an intensity, and their positions in the arrays."""
        kept = np.flatnonzero((self.mz >= low) & (self.mz <= high) & (self.intensity > 0))
        return self.mz[kept], kept


@dataclass(frozen=True)
class Similarity:
    """Forward and reverse score of one comparison, and the pairs behind them as positions in the original arrays.

    `range_a` and `range_b` are the m/z limits within which each spectrum was compared.
    """

    forward: float
    reverse: float
    pairs: tuple[PeakPair, ...]
    range_a: tuple[float, float]
    range_b: tuple[float, float]


def common_scanned_range(a: Peaks, b: Peaks) -> tuple[float, float]:
    """The m/z range that both spectra scanned; an unknown limit counts as unlimited. Empty when low > high."""
    (low_a, high_a), (low_b, high_b) = a.scanned, b.scanned
    return max(low_a, low_b), min(high_a, high_b)


def mass_difference(a: Peaks, b: Peaks) -> float:
    """Molecular mass of a minus that of b.

    Raises:
        InvalidValueError: one of them is not known.
    """
    if a.molecular_mass is None or b.molecular_mass is None:
        raise InvalidValueError("this measure needs the molecular mass of both spectra", "give --mass or use cosine")
    return a.molecular_mass - b.molecular_mass


def weighted_cosine_similarity(
    a: Peaks, b: Peaks, weighting: Weighting = DEFAULT_WEIGHTING, tolerance: Tolerance = UNIT_MASS_TOLERANCE
) -> Similarity:
    """Weighted cosine C = sum over pairs w_a w_b / sqrt(sum w_a^2 sum w_b^2)."""
    limits = common_scanned_range(a, b)
    return _score(a, b, limits, limits, weighting, tolerance, (0.0,))


def shifted_similarity(
    a: Peaks, b: Peaks, weighting: Weighting = DEFAULT_WEIGHTING, tolerance: Tolerance = UNIT_MASS_TOLERANCE
) -> Similarity:
    """Peaks match directly or after adding the mass difference to b, one-to-one over the union of candidates.

    With equal molecular masses this is the weighted cosine. Equals matchms ModifiedCosineGreedy.
    """
    limits = common_scanned_range(a, b)
    shift = mass_difference(a, b)
    # A shift within the tolerance would offer every pair twice.
    shifts = (0.0,) if abs(shift) <= tolerance.at(a.molecular_mass or 0.0) else (0.0, shift)
    return _score(a, b, limits, limits, weighting, tolerance, shifts)


def neutral_loss_similarity(
    a: Peaks, b: Peaks, weighting: Weighting = DEFAULT_WEIGHTING, tolerance: Tolerance = UNIT_MASS_TOLERANCE
) -> Similarity:
    """Cosine of the neutral-loss spectra: m_a - (m_b + difference) within the tolerance; peaks at and above M left out.

    The zero loss (molecular ion against molecular ion) does not count. The common range is taken in losses: a loss
    that one of the two could not have shown is left out.
    """
    shift = mass_difference(a, b)
    (low_a, high_a), (low_b, high_b) = a.scanned, b.scanned
    low = max(low_a, low_b + shift)
    high = min(high_a, high_b + shift, (a.molecular_mass or 0.0) - _ZERO_LOSS)
    return _score(a, b, (low, high), (low - shift, high - shift), weighting, tolerance, (shift,))


def _score(
    a: Peaks,
    b: Peaks,
    range_a: tuple[float, float],
    range_b: tuple[float, float],
    weighting: Weighting,
    tolerance: Tolerance,
    shifts: tuple[float, ...],
) -> Similarity:
    mz_a, kept_a = a.within(*range_a)
    mz_b, kept_b = b.within(*range_b)
    if len(mz_a) == 0 or len(mz_b) == 0:
        return Similarity(0.0, 0.0, (), range_a, range_b)
    # Relative intensities keep the norms away from overflow; scores do not depend on a constant factor.
    weight_a = weighting.weigh(mz_a, a.intensity[kept_a] / a.intensity[kept_a].max())
    weight_b = weighting.weigh(mz_b, b.intensity[kept_b] / b.intensity[kept_b].max())
    candidates = [pair for shift in shifts for pair in candidate_pairs(mz_a, mz_b, tolerance, shift)]
    pairs = pair_peaks_greedy(candidates, mz_a, weight_a, mz_b, weight_b)
    product = float(sum(weight_a[p.a] * weight_b[p.b] for p in pairs))
    matched_a = float(sum(weight_a[p.a] ** 2 for p in pairs))
    norm_a, norm_b = float(np.dot(weight_a, weight_a)), float(np.dot(weight_b, weight_b))
    original = tuple(PeakPair(int(kept_a[p.a]), int(kept_b[p.b]), p.shifted) for p in pairs)
    forward = _ratio(product, norm_a * norm_b)
    # The reverse score is never the lower one; rounding and underflow of tiny weights must not make it so.
    reverse = max(forward, _ratio(product, matched_a * norm_b))
    return Similarity(forward, reverse, original, range_a, range_b)


def _ratio(product: float, squared_norm: float) -> float:
    return min(1.0, product / squared_norm**0.5) if squared_norm > 0 else 0.0


SCORES = {
    Measure.COSINE: weighted_cosine_similarity,
    Measure.LOSS: neutral_loss_similarity,
    Measure.SHIFTED: shifted_similarity,
}
