"""Which peaks belong together: tolerance edges, one-to-one choice, ties."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray

from speclib.similarity.pairing import PeakPair, candidate_pairs, pair_peaks_greedy
from speclib.units import Tolerance

Floats = NDArray[np.float64]


def array(*values: float) -> Floats:
    return np.array(values, dtype=np.float64)


def plain(pairs: list[PeakPair]) -> list[tuple[int, int]]:
    return [(pair.a, pair.b) for pair in pairs]


@pytest.mark.parametrize(
    ("a", "b", "tolerance", "matches"),
    [
        (43.0, 43.1, Tolerance(0.1, "da"), True),  # 43.1 - 43.0 is 0.10000000000000142
        (43.1, 43.0, Tolerance(0.1, "da"), True),
        (43.0, 43.1001, Tolerance(0.1, "da"), False),
        (43.0, 43.0, Tolerance(0.0, "da"), True),
        (43.0, 44.0, Tolerance(0.0, "da"), False),
        (43.0, 43.000001, Tolerance(0.0, "da"), False),
        (500.0, 500.005, Tolerance(10.0, "ppm"), True),
        (500.0, 500.0051, Tolerance(10.0, "ppm"), False),
        (50.0, 50.0005, Tolerance(10.0, "ppm"), True),
        (50.0, 50.001, Tolerance(10.0, "ppm"), False),
    ],
)
def test_edges_of_the_tolerance_count_as_inside(a: float, b: float, tolerance: Tolerance, matches: bool) -> None:
    assert bool(candidate_pairs(array(a), array(b), tolerance)) is matches


def test_ppm_are_taken_at_the_mz_of_the_first_spectrum() -> None:
    tolerance = Tolerance(1e5, "ppm")  # a tenth, to make the difference visible
    assert candidate_pairs(array(100.0), array(110.5), tolerance) == []
    assert plain(candidate_pairs(array(110.5), array(100.0), tolerance)) == [(0, 0)]


def test_candidates_come_in_order_of_a_then_b() -> None:
    found = candidate_pairs(array(50.0, 50.1), array(49.95, 50.05), Tolerance(0.2, "da"))
    assert plain(found) == [(0, 0), (0, 1), (1, 0), (1, 1)]


def test_a_shift_is_added_to_the_second_spectrum() -> None:
    found = candidate_pairs(array(57.0, 71.0), array(57.0), Tolerance(0.0, "da"), shift=14.0)
    assert found == [PeakPair(1, 0, True)]


def test_the_best_product_is_chosen_first_and_each_peak_once() -> None:
    mz_a, weight_a = array(99.95, 100.05), array(90.0, 100.0)
    mz_b, weight_b = array(100.0, 100.14), array(100.0, 80.0)
    candidates = candidate_pairs(mz_a, mz_b, Tolerance(0.1, "da"))
    assert plain(candidates) == [(0, 0), (1, 0), (1, 1)]
    assert plain(pair_peaks_greedy(candidates, mz_a, weight_a, mz_b, weight_b)) == [(1, 0)]


def test_equal_products_go_to_the_lower_mz_of_a_then_of_b() -> None:
    ones = np.ones(2)
    mz_a, mz_b = array(100.0, 100.1), array(100.05, 100.15)
    everything = [PeakPair(a, b) for a in (1, 0) for b in (1, 0)]
    assert plain(pair_peaks_greedy(everything, mz_a, ones, mz_b, ones)) == [(0, 0), (1, 1)]
    crossed = [PeakPair(1, 0), PeakPair(0, 1), PeakPair(0, 0)]
    assert plain(pair_peaks_greedy(crossed[:2], mz_a, ones, mz_b, ones)) == [(0, 1), (1, 0)]
    assert plain(pair_peaks_greedy(crossed, mz_a, ones, mz_b, ones)) == [(0, 0)]


@settings(deadline=None)
@given(
    st.lists(st.integers(1, 3), min_size=1, max_size=6),
    st.lists(st.integers(1, 3), min_size=1, max_size=6),
    st.randoms(use_true_random=False),
)
def test_the_choice_does_not_depend_on_the_order_of_candidates(
    heights_a: list[int], heights_b: list[int], rng: object
) -> None:
    """Small whole heights make many ties; the written rule alone has to decide."""
    weight_a, weight_b = np.array(heights_a, dtype=np.float64), np.array(heights_b, dtype=np.float64)
    mz_a = array(*(50.0 + i for i in range(len(weight_a))))
    mz_b = array(*(50.0 + i for i in range(len(weight_b))))
    candidates = candidate_pairs(mz_a, mz_b, Tolerance(1.0, "da"))
    first = pair_peaks_greedy(candidates, mz_a, weight_a, mz_b, weight_b)
    rng.shuffle(candidates)  # type: ignore[attr-defined]
    assert pair_peaks_greedy(candidates, mz_a, weight_a, mz_b, weight_b) == first
    assert len({pair.a for pair in first}) == len({pair.b for pair in first}) == len(first)


def test_pairs_without_weight_are_left_out() -> None:
    zero_and_one = array(0.0, 1.0)
    mz = array(50.0, 51.0)
    candidates = candidate_pairs(mz, mz, Tolerance(0.0, "da"))
    assert plain(pair_peaks_greedy(candidates, mz, zero_and_one, mz, np.ones(2))) == [(1, 1)]
