"""Scores: check values, the assignment behind them, ranges, and what is left out."""

from __future__ import annotations

import json
from collections.abc import Callable, Sequence
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from scipy.optimize import linear_sum_assignment

from speclib.errors import InvalidValueError
from speclib.similarity.pairing import candidate_pairs
from speclib.similarity.scores import (
    SCORES,
    Measure,
    Peaks,
    Similarity,
    common_scanned_range,
    mass_difference,
    neutral_loss_similarity,
    shifted_similarity,
    weighted_cosine_similarity,
)
from speclib.similarity.weights import WEIGHTINGS, Weighting
from speclib.units import UNIT_MASS_TOLERANCE, Tolerance

PAIRS: list[dict[str, Any]] = json.loads(
    (Path(__file__).parents[1] / "golden" / "similarity_pairs.json").read_text(encoding="utf-8")
)["pairs"]
CASES = [pytest.param(pair, row, id=f"{pair['id']}-{row['weights']}") for pair in PAIRS for row in pair["scores"]]
GREEDY_IS_NOT_OPTIMAL = "P06"  # two candidate partners inside the tolerance
PLAIN = WEIGHTINGS["plain"]

Rows = Sequence[Sequence[float]]


def peaks(rows: Rows, mass: float | None = None, low: float | None = None, high: float | None = None) -> Peaks:
    mz, intensity = np.array(rows, dtype=np.float64).T
    return Peaks(mz.copy(), intensity.copy(), mass, low, high)


def of_pair(pair: dict[str, Any]) -> tuple[Peaks, Peaks, Tolerance]:
    query, library = peaks(pair["query"], pair["query_M"]), peaks(pair["library"], pair["library_M"])
    return query, library, Tolerance(pair["tolerance_da"], "da")


def weighting_of(powers: list[float]) -> Weighting:
    return Weighting("as in the check values", powers[0], powers[1], "")


def optimal(
    a: Peaks, b: Peaks, weighting: Weighting, tolerance: Tolerance, shifts: tuple[float, ...]
) -> tuple[float, float]:
    """Forward and reverse score with the best possible one-to-one assignment."""
    weight_a, weight_b = weighting.weigh(a.mz, a.intensity), weighting.weigh(b.mz, b.intensity)
    gain = np.zeros((len(a.mz), len(b.mz)))
    for shift in shifts:
        for pair in candidate_pairs(a.mz, b.mz, tolerance, shift):
            gain[pair.a, pair.b] = weight_a[pair.a] * weight_b[pair.b]
    rows, columns = linear_sum_assignment(gain, maximize=True)
    used = gain[rows, columns] > 0
    product = gain[rows, columns].sum()
    norm_a, norm_b = float(weight_a @ weight_a), float(weight_b @ weight_b)
    matched = float((weight_a[rows[used]] ** 2).sum())
    return product / (norm_a * norm_b) ** 0.5, product / (matched * norm_b) ** 0.5 if matched else 0.0


@pytest.mark.parametrize(("pair", "row"), CASES)
def test_cosine_equals_the_check_values(pair: dict[str, Any], row: dict[str, Any]) -> None:
    query, library, tolerance = of_pair(pair)
    found = weighted_cosine_similarity(query, library, weighting_of(row["weights"]), tolerance)
    score, matches, _ = row["cosine"]
    assert found.forward == pytest.approx(score, abs=1e-5)
    assert len(found.pairs) == matches


@pytest.mark.parametrize(("pair", "row"), CASES)
def test_shifted_equals_the_check_values(pair: dict[str, Any], row: dict[str, Any]) -> None:
    query, library, tolerance = of_pair(pair)
    found = shifted_similarity(query, library, weighting_of(row["weights"]), tolerance)
    score, matches, _ = row["shifted"]
    assert found.forward == pytest.approx(score, abs=1e-5)
    assert len(found.pairs) == matches


@pytest.mark.parametrize(("pair", "row"), CASES)
def test_neutral_loss_equals_the_check_values(pair: dict[str, Any], row: dict[str, Any]) -> None:
    query, library, tolerance = of_pair(pair)
    found = neutral_loss_similarity(query, library, weighting_of(row["weights"]), tolerance)
    score, matches, _ = row["loss"]
    assert found.forward == pytest.approx(score, abs=1e-5)
    assert len(found.pairs) == matches


@pytest.mark.parametrize(("pair", "row"), CASES)
def test_reverse_equals_the_check_values_where_the_assignment_is_the_same(
    pair: dict[str, Any], row: dict[str, Any]
) -> None:
    query, library, tolerance = of_pair(pair)
    weighting = weighting_of(row["weights"])
    score, matches = row["reverse_optimal"]
    best_forward, best_reverse = optimal(query, library, weighting, tolerance, (0.0,))
    # The check value rests on the optimal assignment: the oracle has to give it for every pair.
    assert best_reverse == pytest.approx(score, abs=1e-5)
    assert best_forward == pytest.approx(row["cosine"][2], abs=1e-5)
    found = weighted_cosine_similarity(query, library, weighting, tolerance)
    if pair["id"] == GREEDY_IS_NOT_OPTIMAL:
        assert found.forward < best_forward
        assert found.reverse < best_reverse
        assert len(found.pairs) == matches - 1
    else:
        assert found.reverse == pytest.approx(score, abs=1e-5)
        assert len(found.pairs) == matches


@pytest.mark.parametrize(("pair", "row"), CASES)
def test_greedy_never_exceeds_the_optimal_assignment(pair: dict[str, Any], row: dict[str, Any]) -> None:
    query, library, tolerance = of_pair(pair)
    weighting = weighting_of(row["weights"])
    shift = mass_difference(query, library)
    best, _ = optimal(query, library, weighting, tolerance, (0.0, shift))
    assert best == pytest.approx(row["shifted"][2], abs=1e-5)
    assert shifted_similarity(query, library, weighting, tolerance).forward <= best + 1e-12


HEXANAL: list[list[float]] = [[29, 60], [41, 70], [44, 100], [56, 82], [57, 42], [72, 20], [82, 16], [100, 1]]


def test_a_range_scanned_from_higher_up_does_not_lower_the_score_of_the_same_substance() -> None:
    unknown = peaks([row for row in HEXANAL if row[0] >= 50], 100, 50.0, 550.0)
    reference = peaks(HEXANAL, 100, 29.0, 300.0)
    for score in SCORES.values():
        for a, b in ((unknown, reference), (reference, unknown)):
            found = score(a, b, PLAIN)
            assert found.forward == pytest.approx(1.0)
            assert found.reverse == pytest.approx(1.0)
    unlimited = peaks([row for row in HEXANAL if row[0] >= 50], 100)
    assert weighted_cosine_similarity(unlimited, reference, PLAIN).forward < 0.8


def test_a_limit_that_is_not_known_counts_as_unlimited() -> None:
    nothing_known, from_40, to_90 = peaks(HEXANAL), peaks(HEXANAL, low=40.0), peaks(HEXANAL, high=90.0)
    assert nothing_known.scanned == (float("-inf"), float("inf"))
    assert common_scanned_range(nothing_known, from_40) == (40.0, float("inf"))
    assert common_scanned_range(from_40, to_90) == (40.0, 90.0)
    assert weighted_cosine_similarity(from_40, to_90).range_a == (40.0, 90.0)


def test_limits_belong_to_the_range_and_positions_are_those_of_the_whole_spectrum() -> None:
    a, b = peaks(HEXANAL, low=41.0, high=72.0), peaks(HEXANAL[1:], low=35.0)
    found = weighted_cosine_similarity(a, b, PLAIN)
    assert [(pair.a, pair.b) for pair in found.pairs] == [(1, 0), (2, 1), (3, 2), (4, 3), (5, 4)]
    assert found.forward == pytest.approx(1.0)


@pytest.mark.parametrize("measure", list(Measure))
def test_ranges_without_overlap_score_zero(measure: Measure) -> None:
    a, b = peaks(HEXANAL, 100, 29.0, 45.0), peaks(HEXANAL, 100, 50.0, 300.0)
    assert SCORES[measure](a, b, PLAIN, UNIT_MASS_TOLERANCE) == Similarity(0.0, 0.0, (), (50.0, 45.0), (50.0, 45.0))


def test_nothing_in_common_scores_zero() -> None:
    found = weighted_cosine_similarity(peaks([[43, 100]]), peaks([[57, 100]]))
    assert (found.forward, found.reverse, found.pairs) == (0.0, 0.0, ())


def test_losses_that_one_of_both_could_not_have_shown_are_left_out() -> None:
    # Same losses 15, 29, 43 and 71; the heavier one was scanned from 60, so its loss 71 (m/z 43) is missing.
    light = peaks([[29, 50], [57, 100], [71, 60], [85, 40]], 100, 20.0, 200.0)
    heavy = peaks([[71, 100], [85, 60], [99, 40]], 114, 60.0, 200.0)
    found = neutral_loss_similarity(heavy, light, PLAIN)
    assert found.forward == pytest.approx(1.0)
    assert (found.range_a, found.range_b) == ((60.0, 113.5), (46.0, 99.5))
    turned = neutral_loss_similarity(light, heavy, PLAIN)
    assert turned.forward == pytest.approx(1.0)
    assert (turned.range_a, turned.range_b) == (found.range_b, found.range_a)


def test_the_upper_limit_of_one_cuts_the_losses_of_the_other() -> None:
    # a stops at m/z 90: its smallest loss is 30, so the loss 15 of b is not held against it.
    a = peaks([[57, 100], [71, 50]], 120, 20.0, 90.0)
    b = peaks([[37, 100], [51, 50], [85, 90]], 100, 20.0, 300.0)
    assert neutral_loss_similarity(a, b, PLAIN).forward == pytest.approx(1.0)


@pytest.mark.parametrize("tolerance", [Tolerance(0.0, "da"), Tolerance(0.1, "da"), Tolerance(1.0, "ppm")], ids=str)
def test_the_zero_loss_does_not_count_at_any_tolerance(tolerance: Tolerance) -> None:
    # The molecular ion lies an electron mass below M, more than 1 ppm of it.
    a = peaks([[57.0, 10], [99.99945, 100]], 100.0)
    b = peaks([[71.0, 10], [113.99945, 100]], 114.0)
    found = neutral_loss_similarity(a, b, PLAIN, tolerance)
    assert [(pair.a, pair.b) for pair in found.pairs] == [(0, 0)]
    assert found.forward == pytest.approx(1.0)


def test_peaks_at_and_above_the_molecular_mass_are_no_losses() -> None:
    alone = peaks([[57, 100], [85, 60]], 100)
    impure = peaks([[57, 100], [85, 60], [100, 30], [101, 5], [207, 80]], 100)
    assert neutral_loss_similarity(impure, alone, PLAIN).forward == pytest.approx(1.0)


def test_a_loss_of_one_hydrogen_counts() -> None:
    found = neutral_loss_similarity(peaks([[99, 100]], 100), peaks([[113, 100]], 114), PLAIN)
    assert found.forward == pytest.approx(1.0)


@pytest.mark.parametrize("score", [shifted_similarity, neutral_loss_similarity])
def test_measures_with_a_mass_difference_need_both_masses(score: Callable[[Peaks, Peaks], Similarity]) -> None:
    with pytest.raises(InvalidValueError, match="molecular mass"):
        score(peaks(HEXANAL, 100), peaks(HEXANAL))
    with pytest.raises(InvalidValueError, match="molecular mass"):
        score(peaks(HEXANAL), peaks(HEXANAL, 100))


def test_reverse_similarity_ignores_peaks_only_the_unknown_has() -> None:
    clean = peaks(HEXANAL)
    bleed: list[list[float]] = [[73, 60], [147, 35], [207, 80]]
    impure = peaks(sorted(HEXANAL + bleed))
    found = weighted_cosine_similarity(impure, clean)
    assert found.reverse == pytest.approx(1.0)
    assert found.forward < 0.9
    turned = weighted_cosine_similarity(clean, impure)
    assert turned.reverse < 0.9


def test_a_shifted_pair_is_marked_and_each_peak_is_used_once() -> None:
    # The unknown is 14 heavier: 43 stays, 57 moves to 71.
    unknown, reference = peaks([[43, 100], [71, 50]], 100), peaks([[43, 100], [57, 50]], 86)
    found = shifted_similarity(unknown, reference, PLAIN)
    assert [(pair.a, pair.b, pair.shifted) for pair in found.pairs] == [(0, 0, False), (1, 1, True)]
    assert found.forward == pytest.approx(1.0)


def test_a_mass_difference_within_the_tolerance_shifts_nothing() -> None:
    a, b = peaks([[43.0, 100], [57.0, 50]], 100.0), peaks([[43.0, 100], [57.0, 50]], 99.997)
    found = shifted_similarity(a, b, PLAIN, Tolerance(0.005, "da"))
    assert not any(pair.shifted for pair in found.pairs)
    assert found.forward == pytest.approx(1.0)


def test_a_tie_goes_to_the_lower_mz() -> None:
    # 57 of the reference matches 57 directly and 71 after the shift, with equal products: the lower wins.
    found = shifted_similarity(peaks([[57, 100], [71, 100]], 100), peaks([[57, 100]], 86), PLAIN)
    assert [(pair.a, pair.b, pair.shifted) for pair in found.pairs] == [(0, 0, False)]


def test_a_peak_without_intensity_is_no_peak() -> None:
    with_zero, without = peaks([*HEXANAL, [120, 0]]), peaks(HEXANAL)
    for a, b in ((with_zero, without), (without, with_zero), (with_zero, with_zero)):
        found = weighted_cosine_similarity(a, b)
        assert found.forward == pytest.approx(1.0)
        assert len(found.pairs) == len(HEXANAL)
