"""What speaks against a neighbour, in words."""

from __future__ import annotations

import numpy as np

from speclib.search.disagreements import MOST_NAMED, disagreements
from speclib.similarity.scores import Peaks, shifted_similarity, weighted_cosine_similarity


def peaks(heights: dict[int, float], mass: float | None = None) -> Peaks:
    mz = np.array(sorted(heights), dtype=float)
    return Peaks(mz, np.array([heights[int(m)] for m in mz], dtype=float), mass)


def test_a_peak_that_only_one_has_is_named_with_its_height() -> None:
    ours, theirs = peaks({43: 100, 58: 50, 97: 40}), peaks({43: 100, 58: 50, 149: 20})
    words = disagreements(ours, theirs, weighted_cosine_similarity(ours, theirs))
    assert words == (
        "unknown has m/z 97 at 40 that the reference lacks",
        "reference has m/z 149 at 20 that the unknown lacks",
    )


def test_pairs_of_very_unlike_height_are_named() -> None:
    ours, theirs = peaks({43: 100, 58: 5}), peaks({43: 100, 58: 60})
    words = disagreements(ours, theirs, weighted_cosine_similarity(ours, theirs))
    assert words == ("m/z 58 is 5 in the unknown, 60 in the reference",)


def test_a_peak_whose_partner_went_to_another_says_so() -> None:
    # With a difference of 14 the reference's m/z 43 pairs with the taller m/z 57, and the unknown's m/z 43 is left.
    ours, theirs = peaks({43: 30, 57: 100}, 114), peaks({43: 100}, 100)
    words = disagreements(ours, theirs, shifted_similarity(ours, theirs))
    assert words == ("unknown has m/z 43 at 30 without a partner left (the reference's m/z 43 pairs with m/z 57)",)


def test_a_shifted_pair_of_unlike_height_names_both_mz() -> None:
    ours, theirs = peaks({57: 100, 99: 10}, 114), peaks({57: 100, 85: 60}, 100)
    words = disagreements(ours, theirs, shifted_similarity(ours, theirs))
    assert words == ("m/z 99 at 10 pairs with the reference's m/z 85 at 60",)


def test_a_long_list_ends_with_a_count() -> None:
    ours, theirs = peaks(dict.fromkeys(range(50, 70), 50)), peaks(dict.fromkeys(range(100, 120), 50))
    words = disagreements(ours, theirs, weighted_cosine_similarity(ours, theirs))
    assert len(words) == MOST_NAMED + 1
    assert words[-1] == f"and {40 - MOST_NAMED} more"
