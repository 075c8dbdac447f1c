"""Spectra on whole m/z: sums, positions, order."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import ArrayLike

from speclib.chemistry.formula import parse_formula
from speclib.cleaning.nominal import bin_to_nominal_mass
from speclib.model.spectrum import MassAccuracy, Spectrum


def spectrum_of(mz: ArrayLike, intensity: ArrayLike, accuracy: MassAccuracy = MassAccuracy.UNIT) -> Spectrum:
    return Spectrum(np.asarray(mz, dtype=np.float64), np.asarray(intensity, dtype=np.float64), accuracy)


def test_whole_mz_stay_as_they_are() -> None:
    spectrum = spectrum_of([43.0, 57.0, 563.0], [100.0, 0.0, 3.0])
    peaks = bin_to_nominal_mass(spectrum, parse_formula("C40H82"))
    assert peaks.mz.tolist() == [43.0, 57.0, 563.0]
    assert peaks.intensity.tolist() == [100.0, 0.0, 3.0]
    assert peaks.position.tolist() == [0, 1, 2]
    assert peaks.assignment.doubtful == ()


def test_peaks_on_the_same_whole_mz_are_added_and_named_by_the_tallest() -> None:
    spectrum = spectrum_of(
        [43.0178, 43.0542, 57.0335, 57.0699, 71.0855], [10.0, 30.0, 5.0, 2.0, 1.0], MassAccuracy.ACCURATE
    )
    peaks = bin_to_nominal_mass(spectrum)
    assert peaks.mz.tolist() == [43.0, 57.0, 71.0]
    assert peaks.intensity.tolist() == [40.0, 7.0, 1.0]
    assert peaks.position.tolist() == [1, 2, 4]
    assert peaks.assignment.unit_mz.tolist() == [43, 43, 57, 57, 71]


def test_arrays_have_the_types_that_the_record_promises() -> None:
    for mz in ([43.0, 57.0], [43.02, 43.05, 57.07]):
        peaks = bin_to_nominal_mass(spectrum_of(mz, [1.0] * len(mz)))
        assert peaks.mz.dtype == np.float64
        assert peaks.intensity.dtype == np.float64
        assert peaks.position.dtype == np.int64


def test_the_spectrum_is_not_changed() -> None:
    spectrum = spectrum_of([43.02, 57.07, 562.64], [100.0, 80.0, 1.0])
    before = spectrum.content_hash
    peaks = bin_to_nominal_mass(spectrum)
    peaks.intensity[0] = 0.0
    assert spectrum_of(spectrum.mz, spectrum.intensity).content_hash == before


def test_a_known_formula_puts_the_molecular_ion_right() -> None:
    # Only the molecular ion of C12H5Br5O over a hydrocarbon rest.
    mz = [*(14.01565 * n + 1.0073 for n in range(3, 29)), 559.63]
    spectrum = spectrum_of(mz, [100.0] * len(mz))
    assert bin_to_nominal_mass(spectrum, parse_formula("C12H5Br5O")).mz[-1] == 560.0
    assert len(mz) - 1 in bin_to_nominal_mass(spectrum).assignment.doubtful


@settings(deadline=None)
@given(
    st.lists(st.tuples(st.floats(29.5, 320.0), st.floats(0.0, 1e9)), min_size=1, max_size=60, unique_by=lambda p: p[0])
)
def test_sums_positions_and_order(rows: list[tuple[float, float]]) -> None:
    rows = sorted(rows)
    if not any(height > 0 for _, height in rows):
        rows[0] = (rows[0][0], 1.0)
    spectrum = spectrum_of([mz for mz, _ in rows], [height for _, height in rows])
    peaks = bin_to_nominal_mass(spectrum)
    assert np.all(np.diff(peaks.mz) > 0)
    assert np.all(peaks.mz == np.rint(peaks.mz))
    assert float(peaks.intensity.sum()) == pytest.approx(spectrum.total_ion_current)
    unit = peaks.assignment.unit_mz
    for whole, total, position in zip(peaks.mz, peaks.intensity, peaks.position, strict=True):
        members = np.flatnonzero(unit == int(whole))
        assert total == pytest.approx(float(spectrum.intensity[members].sum()))
        assert position in members
        assert spectrum.intensity[position] == spectrum.intensity[members].max()
