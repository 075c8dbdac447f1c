"""Laws of the scores on random spectra: bounds, symmetry, scale, ranges, one-to-one pairs, extreme intensities."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from speclib.similarity.scores import SCORES, Measure, Peaks, shifted_similarity, weighted_cosine_similarity
from speclib.similarity.weights import WEIGHTINGS, Weighting
from speclib.units import UNIT_MASS_TOLERANCE, Tolerance

MEASURES = st.sampled_from(list(Measure))
WEIGHTS = st.sampled_from(list(WEIGHTINGS.values()))
UNIT = UNIT_MASS_TOLERANCE
ACCURATE = Tolerance(0.02, "da")
TOLERANCES = st.sampled_from([UNIT, ACCURATE, Tolerance(0.4, "da")])


@st.composite
def spectra(draw: st.DrawFn, heights: st.SearchStrategy[float] | None = None, whole: bool = True) -> Peaks:
    """A spectrum of 1 to 15 peaks with a molecular mass and, now and then, limits; whole heights make ties likely."""
    positions = st.integers(29, 70).map(float) if whole else st.floats(29.0, 32.0)
    mz = np.array(sorted(draw(st.sets(positions, min_size=1, max_size=15))))
    height = heights if heights is not None else st.integers(0, 6).map(float)
    intensity = np.array([draw(height) for _ in mz])
    low = draw(st.none() | st.integers(25, 45).map(float))
    high = draw(st.none() | st.integers(50, 80).map(float))
    return Peaks(mz, intensity, float(draw(st.integers(40, 90))), low, high)


ANY_SPECTRUM = spectra() | spectra(whole=False)


@settings(deadline=None, max_examples=60)
@given(ANY_SPECTRUM, ANY_SPECTRUM, MEASURES, WEIGHTS, TOLERANCES)
def test_scores_lie_between_0_and_1_and_reverse_is_never_the_lower(
    a: Peaks, b: Peaks, measure: Measure, weighting: Weighting, tolerance: Tolerance
) -> None:
    found = SCORES[measure](a, b, weighting, tolerance)
    assert 0.0 <= found.forward <= found.reverse <= 1.0
    assert (found.forward > 0) is bool(found.pairs)


@settings(deadline=None, max_examples=60)
@given(ANY_SPECTRUM, ANY_SPECTRUM, MEASURES, WEIGHTS, TOLERANCES)
def test_pairs_are_one_to_one_within_the_tolerance_and_the_ranges(
    a: Peaks, b: Peaks, measure: Measure, weighting: Weighting, tolerance: Tolerance
) -> None:
    found = SCORES[measure](a, b, weighting, tolerance)
    assert len({pair.a for pair in found.pairs}) == len({pair.b for pair in found.pairs}) == len(found.pairs)
    shift = (a.molecular_mass or 0.0) - (b.molecular_mass or 0.0)
    for pair in found.pairs:
        mz_a, mz_b = float(a.mz[pair.a]), float(b.mz[pair.b])
        assert a.intensity[pair.a] > 0
        assert b.intensity[pair.b] > 0
        assert abs(mz_a - mz_b - (shift if pair.shifted else 0.0)) <= tolerance.at(mz_a) + 2e-9
        assert found.range_a[0] <= mz_a <= found.range_a[1]
        assert found.range_b[0] <= mz_b <= found.range_b[1]
        assert measure is not Measure.COSINE or not pair.shifted
        assert measure is not Measure.LOSS or pair.shifted or shift == 0.0


@settings(deadline=None, max_examples=60)
@given(ANY_SPECTRUM, ANY_SPECTRUM, MEASURES, WEIGHTS, TOLERANCES)
def test_the_forward_score_is_symmetric_with_a_tolerance_in_da(
    a: Peaks, b: Peaks, measure: Measure, weighting: Weighting, tolerance: Tolerance
) -> None:
    forth, back = SCORES[measure](a, b, weighting, tolerance), SCORES[measure](b, a, weighting, tolerance)
    assert forth.forward == pytest.approx(back.forward, abs=1e-12)
    assert {(pair.a, pair.b) for pair in forth.pairs} == {(pair.b, pair.a) for pair in back.pairs}


@settings(deadline=None, max_examples=60)
@given(ANY_SPECTRUM, ANY_SPECTRUM, MEASURES, WEIGHTS, st.floats(1e-6, 1e6), st.floats(1e-6, 1e6))
def test_scores_do_not_depend_on_the_scale_of_either_spectrum(
    a: Peaks, b: Peaks, measure: Measure, weighting: Weighting, factor_a: float, factor_b: float
) -> None:
    # Powers of two scale without rounding, so that ties stay ties.
    scale_a, scale_b = 2.0 ** round(math.log2(factor_a)), 2.0 ** round(math.log2(factor_b))
    first = SCORES[measure](a, b, weighting, UNIT)
    scaled_a = Peaks(a.mz, a.intensity * scale_a, a.molecular_mass, a.mz_from, a.mz_to)
    scaled_b = Peaks(b.mz, b.intensity * scale_b, b.molecular_mass, b.mz_from, b.mz_to)
    again = SCORES[measure](scaled_a, scaled_b, weighting, UNIT)
    assert again.pairs == first.pairs
    assert again.forward == pytest.approx(first.forward, abs=1e-12)
    assert again.reverse == pytest.approx(first.reverse, abs=1e-12)


@settings(deadline=None, max_examples=60)
@given(ANY_SPECTRUM, MEASURES, WEIGHTS, TOLERANCES)
def test_a_spectrum_equals_itself(a: Peaks, measure: Measure, weighting: Weighting, tolerance: Tolerance) -> None:
    found = SCORES[measure](a, a, weighting, tolerance)
    if found.pairs and tolerance is UNIT and np.all(a.mz == np.rint(a.mz)):
        assert found.forward == pytest.approx(1.0)
        assert all(pair.a == pair.b for pair in found.pairs)


@settings(deadline=None, max_examples=60)
@given(ANY_SPECTRUM, ANY_SPECTRUM, WEIGHTS, TOLERANCES)
def test_shifted_is_the_cosine_when_the_molecular_masses_are_equal(
    a: Peaks, b: Peaks, weighting: Weighting, tolerance: Tolerance
) -> None:
    b = Peaks(b.mz, b.intensity, a.molecular_mass, b.mz_from, b.mz_to)
    assert shifted_similarity(a, b, weighting, tolerance) == weighted_cosine_similarity(a, b, weighting, tolerance)


@settings(deadline=None, max_examples=60)
@given(ANY_SPECTRUM, ANY_SPECTRUM, MEASURES, WEIGHTS)
def test_peaks_outside_the_common_range_and_without_intensity_change_nothing(
    a: Peaks, b: Peaks, measure: Measure, weighting: Weighting
) -> None:
    first = SCORES[measure](a, b, weighting, UNIT)
    (low_a, high_a), (low_b, high_b) = first.range_a, first.range_b
    keep_a = (a.mz >= low_a) & (a.mz <= high_a) & (a.intensity > 0)
    keep_b = (b.mz >= low_b) & (b.mz <= high_b) & (b.intensity > 0)
    cut_a = Peaks(a.mz[keep_a], a.intensity[keep_a], a.molecular_mass, a.mz_from, a.mz_to)
    cut_b = Peaks(b.mz[keep_b], b.intensity[keep_b], b.molecular_mass, b.mz_from, b.mz_to)
    again = SCORES[measure](cut_a, cut_b, weighting, UNIT)
    assert (again.forward, again.reverse, len(again.pairs)) == (first.forward, first.reverse, len(first.pairs))


@settings(deadline=None, max_examples=60)
@given(ANY_SPECTRUM, MEASURES, WEIGHTS, st.integers(25, 75), st.integers(25, 75))
def test_the_same_substance_scanned_over_another_range_scores_1_or_nothing(
    a: Peaks, measure: Measure, weighting: Weighting, low: int, high: int
) -> None:
    a = Peaks(np.unique(np.rint(a.mz)), np.ones(len(np.unique(np.rint(a.mz)))), a.molecular_mass, 20.0, 100.0)
    inside = (a.mz >= low) & (a.mz <= high)
    part = Peaks(a.mz[inside], a.intensity[inside], a.molecular_mass, float(low), float(high))
    for found in (SCORES[measure](part, a, weighting, UNIT), SCORES[measure](a, part, weighting, UNIT)):
        assert found.forward == pytest.approx(1.0) or found.pairs == ()


EXTREME = st.sampled_from([0.0, 5e-324, 1e-300, 1e-150, 1e-3, 1.0, 1e3, 1e150, 1e300]) | st.floats(1e-300, 1e300)


@settings(deadline=None, max_examples=60)
@given(spectra(EXTREME), spectra(EXTREME), MEASURES, WEIGHTS)
def test_extreme_intensities_neither_overflow_nor_give_nan(
    a: Peaks, b: Peaks, measure: Measure, weighting: Weighting
) -> None:
    with np.errstate(over="raise", invalid="raise", divide="raise"):
        found = SCORES[measure](a, b, weighting, UNIT)
    assert 0.0 <= found.forward <= found.reverse <= 1.0
    for pair in found.pairs:
        assert pair.a < len(a.mz)
        assert pair.b < len(b.mz)


@settings(deadline=None, max_examples=60)
@given(spectra(st.floats(1e-3, 1e3)), MEASURES, WEIGHTS, st.sampled_from([1e-290, 1e-200, 1e200, 1e290]))
def test_a_spectrum_equals_itself_at_any_scale(a: Peaks, measure: Measure, weighting: Weighting, factor: float) -> None:
    scaled = Peaks(a.mz, a.intensity * factor, a.molecular_mass, a.mz_from, a.mz_to)
    found = SCORES[measure](a, scaled, weighting, UNIT)
    assert found.forward == pytest.approx(1.0) or found.pairs == ()


@settings(deadline=None, max_examples=60)
@given(ANY_SPECTRUM, ANY_SPECTRUM, MEASURES)
def test_the_arrays_given_are_not_changed(a: Peaks, b: Peaks, measure: Measure) -> None:
    before = [array.copy() for array in (a.mz, a.intensity, b.mz, b.intensity)]
    for array in (a.mz, a.intensity, b.mz, b.intensity):
        array.setflags(write=False)
    SCORES[measure](a, b)
    assert all(np.array_equal(x, y) for x, y in zip(before, (a.mz, a.intensity, b.mz, b.intensity), strict=True))
