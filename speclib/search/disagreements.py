"""What speaks against a neighbour, in words, gravest first."""

from __future__ import annotations

import numpy as np

from speclib.similarity.scores import Peaks, Similarity

MISSING_FROM = 5.0
"""Relative intensity (base peak of the compared range = 100) from which a missing partner is worth words."""
RATIO_FROM = 3.0
"""How many times taller than its partner a peak must be to be named; common practice, no source."""
MOST_NAMED = 6


def disagreements(query: Peaks, reference: Peaks, similarity: Similarity) -> tuple[str, ...]:
    """Peaks that only one of the two has, and pairs of very unlike height, within the range that was compared."""
    found: list[tuple[float, str]] = []
    heights = []
    for peaks, (low, high) in ((query, similarity.range_a), (reference, similarity.range_b)):
        inside = np.where((peaks.mz >= low) & (peaks.mz <= high), peaks.intensity, 0.0)
        top = float(inside.max()) if len(inside) else 0.0
        heights.append(100.0 * inside / top if top > 0 else inside)
    paired = ({p.a for p in similarity.pairs}, {p.b for p in similarity.pairs})
    sides = (
        (query, heights[0], paired[0], "unknown has", "the reference lacks"),
        (reference, heights[1], paired[1], "reference has", "the unknown lacks"),
    )
    for peaks, relative, matched, has, lacks in sides:
        found += [
            (float(relative[i]), f"{has} m/z {peaks.mz[i]:g} at {relative[i]:.0f} that {lacks}")
            for i in np.flatnonzero(relative >= MISSING_FROM)
            if int(i) not in matched
        ]
    for pair in similarity.pairs:
        ours, theirs = float(heights[0][pair.a]), float(heights[1][pair.b])
        if max(ours, theirs) >= MISSING_FROM and max(ours, theirs) > RATIO_FROM * min(ours, theirs):
            partner = "" if not pair.shifted else f" (shifted to m/z {reference.mz[pair.b]:g})"
            found.append(
                (
                    abs(ours - theirs),
                    f"m/z {query.mz[pair.a]:g} is {ours:.0f} in the unknown, {theirs:.0f} in the reference{partner}",
                )
            )
    found.sort(key=lambda item: (-item[0], item[1]))
    named = [text for _, text in found[:MOST_NAMED]]
    if len(found) > MOST_NAMED:
        named.append(f"and {len(found) - MOST_NAMED} more")
    return tuple(named)
