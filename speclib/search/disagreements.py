"""What speaks against a neighbour, in words, gravest first."""

from __future__ import annotations

import numpy as np

from speclib.similarity.scores import Peaks, Similarity

MISSING_FROM = 5.0
"""Relative intensity (base peak of the compared range = 100) from which a missing partner is worth words."""
RATIO_FROM = 3.0
"""How many times taller than its partner a peak must be to be named; common practice, no source."""
MOST_NAMED = 6
SAME_MZ = 0.01
"""Da within which two peaks are called by one m/z in words."""


def disagreements(query: Peaks, reference: Peaks, similarity: Similarity) -> tuple[str, ...]:
    """Peaks that only one of the two has, and pairs of very unlike height, within the range that was compared."""
    found: list[tuple[float, str]] = []
    heights = []
    for peaks, (low, high) in ((query, similarity.range_a), (reference, similarity.range_b)):
        inside = np.where((peaks.mz >= low) & (peaks.mz <= high), peaks.intensity, 0.0)
        top = float(inside.max()) if len(inside) else 0.0
        heights.append(100.0 * inside / top if top > 0 else inside)
    partner_of = ({p.a: p.b for p in similarity.pairs}, {p.b: p.a for p in similarity.pairs})
    names = ("unknown", "reference")
    for side, (peaks, other) in enumerate(((query, reference), (reference, query))):
        for i in np.flatnonzero(heights[side] >= MISSING_FROM):
            if int(i) not in partner_of[side]:
                taken = _taken_by(float(peaks.mz[i]), other, partner_of[1 - side], peaks)
                missing = f"that the {names[1 - side]} lacks" if taken is None else _left_over(names[1 - side], *taken)
                height = float(heights[side][i])
                found.append((height, f"{names[side]} has m/z {peaks.mz[i]:g} at {_height(height)} {missing}"))
    for pair in similarity.pairs:
        ours, theirs = float(heights[0][pair.a]), float(heights[1][pair.b])
        if max(ours, theirs) >= MISSING_FROM and max(ours, theirs) > RATIO_FROM * min(ours, theirs):
            found.append(
                (abs(ours - theirs), _unlike(query.mz[pair.a], ours, reference.mz[pair.b], theirs, pair.shifted))
            )
    found.sort(key=lambda item: (-item[0], item[1]))
    named = [text for _, text in found[:MOST_NAMED]]
    if len(found) > MOST_NAMED:
        named.append(f"and {len(found) - MOST_NAMED} more")
    return tuple(named)


def _unlike(mz: float, ours: float, other_mz: float, theirs: float, shifted: bool) -> str:
    """Words for a pair of very unlike heights; a shifted pair names both m/z."""
    if shifted:
        return f"m/z {mz:g} at {_height(ours)} pairs with the reference's m/z {other_mz:g} at {_height(theirs)}"
    return f"m/z {mz:g} is {_height(ours)} in the unknown, {_height(theirs)} in the reference"


def _height(relative: float) -> str:
    """A relative intensity: whole numbers, and one decimal below 1."""
    return f"{relative:.0f}" if relative >= 1 else f"{relative:.1f}"


def _taken_by(mz: float, other: Peaks, partner_of: dict[int, int], peaks: Peaks) -> tuple[float, float] | None:
    """The other spectrum's peak at `mz` and the m/z that took it as its partner, if it has such a peak."""
    for j in np.flatnonzero(np.abs(other.mz - mz) <= SAME_MZ):
        if int(j) in partner_of:
            return float(other.mz[j]), float(peaks.mz[partner_of[int(j)]])
    return None


def _left_over(name: str, mz: float, taker: float) -> str:
    return f"without a partner left (the {name}'s m/z {mz:g} pairs with m/z {taker:g})"
