"""The spectrum record: what it refuses, how it freezes, compares and hashes."""

from __future__ import annotations

import hashlib
import struct
from typing import Any, cast

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from speclib.errors import InvalidSpectrumError, InvalidValueError
from speclib.model.spectrum import (
    MAX_INTENSITY,
    MAX_MZ,
    MAX_PEAKS,
    MassAccuracy,
    Measurement,
    SourceSpectrum,
    Spectrum,
)

MZ = [43.0, 57.0, 85.0]
INTENSITY = [100.0, 50.0, 0.0]


def spectrum_of(mz: Any, intensity: Any, *rest: Any, **described: Any) -> Spectrum:
    """The constructor, given what the type checker would not let through: lists, and wrong things."""
    return Spectrum(mz, intensity, *rest, **described)


@pytest.mark.parametrize(
    ("mz", "intensity", "reason"),
    [
        ([], [], "no peaks"),
        ([43.0], [], "1 m/z but 0"),
        ([43.0], [1.0, 2.0], "1 m/z but 2"),
        ([43.0, float("nan")], [1.0, 1.0], "m/z of peak 2 is nan"),
        ([43.0, float("inf")], [1.0, 1.0], "m/z of peak 2 is inf"),
        ([43.0], [float("nan")], "intensity of peak 1 is nan"),
        ([43.0], [float("inf")], "intensity of peak 1 is inf"),
        ([43.0], [float("-inf")], "intensity of peak 1 is -inf"),
        ([43.0, 57.0], [1.0, -0.5], "intensity of peak 2 is -0.5"),
        ([-43.0], [1.0], "m/z of peak 1 is -43"),
        ([0.0, 43.0], [1.0, 1.0], "above 0"),
        ([-0.0, 43.0], [1.0, 1.0], "above 0"),
        ([43.0, MAX_MZ + 1], [1.0, 1.0], "at most"),
        ([57.0, 43.0], [1.0, 1.0], "m/z 43 .*not in rising order"),
        ([43.0, 43.0], [1.0, 1.0], "m/z 43 .*stands twice"),
        ([43.0, 57.0], [0.0, 0.0], "above 0"),
        ([43.0], [MAX_INTENSITY * 1.01], "is above"),
        ([[43.0, 57.0]], [[1.0, 1.0]], "2 dimensions"),
        (43.0, 1.0, "0 dimensions"),
        (["43", "abc"], [1.0, 1.0], "list of numbers"),
        ([43.0, 57.0], [1.0, None], "intensity of peak 2 is nan"),
        ([[43.0], [57.0, 58.0]], [1.0, 1.0], "list of numbers"),
        ([43.0 + 1j], [1.0], "list of numbers"),
        (list(range(1, MAX_PEAKS + 2)), [1.0] * (MAX_PEAKS + 1), "more than"),
    ],
)
def test_peaks_that_no_spectrum_can_have_are_refused(mz: Any, intensity: Any, reason: str) -> None:
    with pytest.raises(InvalidSpectrumError, match=reason):
        spectrum_of(mz, intensity)


def test_an_unknown_mass_accuracy_is_refused() -> None:
    with pytest.raises(ValueError, match="nominal"):
        spectrum_of(MZ, INTENSITY, cast(Any, "nominal"))
    assert spectrum_of(MZ, INTENSITY, cast(Any, "accurate")).mass_accuracy is MassAccuracy.ACCURATE


@pytest.mark.parametrize("name", ["mz", "intensity", "relative_intensity"])
def test_arrays_are_float64_and_cannot_be_written(name: str) -> None:
    array = getattr(spectrum_of(np.array(MZ, dtype=np.float32), [100, 50, 0]), name)
    assert array.dtype == np.float64
    assert array.dtype.isnative
    assert array.shape == (3,)
    with pytest.raises(ValueError, match="read-only"):
        array[0] = 1.0


def test_fields_cannot_be_set() -> None:
    spectrum = spectrum_of(MZ, INTENSITY, raw_fields={"NAME": "x"})
    with pytest.raises(AttributeError):
        spectrum.mz = np.array([1.0])  # type: ignore[misc]
    with pytest.raises(TypeError):
        spectrum.raw_fields["NAME"] = "y"  # type: ignore[index]


def test_what_the_caller_later_does_to_its_own_data_does_not_matter() -> None:
    mz, intensity, raw = np.array(MZ), np.array(INTENSITY), {"NAME": "x"}
    spectrum = spectrum_of(mz, intensity, raw_fields=raw)
    mz[0], intensity[0], raw["NAME"] = 1.0, 7.0, "y"
    assert spectrum.mz.tolist() == MZ
    assert spectrum.intensity.tolist() == INTENSITY
    assert dict(spectrum.raw_fields) == {"NAME": "x"}
    assert mz.flags.writeable


def test_a_strided_or_foreign_array_is_copied_into_order() -> None:
    both = np.array([[43.0, 100.0], [57.0, 50.0], [85.0, 0.0]])
    assert spectrum_of(both[:, 0], both[:, 1]) == spectrum_of(MZ, INTENSITY)


def test_equality_is_exact() -> None:
    spectrum = spectrum_of(MZ, INTENSITY)
    assert spectrum == spectrum_of(tuple(MZ), np.array(INTENSITY))
    assert spectrum != spectrum_of([43.0, 57.0, np.nextafter(85.0, 86.0)], INTENSITY)
    assert spectrum != spectrum_of(MZ, [100.0, np.nextafter(50.0, 51.0), 0.0])
    assert spectrum != spectrum_of(MZ, INTENSITY, MassAccuracy.ACCURATE)
    assert spectrum != spectrum_of(MZ, INTENSITY, measurement=Measurement(mz_from=29.0))
    assert spectrum != spectrum_of(MZ, INTENSITY, raw_fields={"NAME": "x"})
    assert spectrum != "spectrum"
    assert (spectrum == 1) is False


def test_equal_spectra_have_equal_hashes() -> None:
    one = spectrum_of(MZ, INTENSITY, measurement=Measurement(mz_from=29.0), raw_fields={"a": "1"})
    two = spectrum_of(np.array(MZ), np.array(INTENSITY), measurement=Measurement(mz_from=29.0), raw_fields={"a": "1"})
    assert one == two
    assert hash(one) == hash(two)
    assert len({one, two, spectrum_of(MZ, [1.0, 2.0, 3.0])}) == 2


def test_a_negative_zero_is_zero() -> None:
    assert spectrum_of(MZ, [100.0, 50.0, -0.0]) == spectrum_of(MZ, INTENSITY)
    assert spectrum_of(MZ, [100.0, 50.0, -0.0]).content_hash == spectrum_of(MZ, INTENSITY).content_hash


def test_the_content_hash_is_sha256_over_little_endian_bytes() -> None:
    by_hand = hashlib.sha256(struct.pack("<3d", *MZ) + struct.pack("<3d", *INTENSITY)).hexdigest()
    assert spectrum_of(MZ, INTENSITY).content_hash == by_hand


@pytest.mark.parametrize("order", ["<f8", ">f8"])
def test_the_content_hash_does_not_depend_on_the_byte_order_of_the_input(order: str) -> None:
    spectrum = spectrum_of(np.array(MZ, dtype=order), np.array(INTENSITY, dtype=order))
    assert spectrum.content_hash == spectrum_of(MZ, INTENSITY).content_hash
    assert spectrum == spectrum_of(MZ, INTENSITY)


def test_the_content_hash_is_of_the_peaks_alone() -> None:
    plain = spectrum_of(MZ, INTENSITY)
    described = spectrum_of(MZ, INTENSITY, MassAccuracy.ACCURATE, Measurement(sample="x"), {"a": "b"})
    assert plain.content_hash == described.content_hash
    # A value that moves from one array to the other is another content.
    assert spectrum_of([1.0, 2.0], [3.0, 4.0]).content_hash != spectrum_of([1.0, 3.0], [2.0, 4.0]).content_hash


def test_quantities() -> None:
    spectrum = spectrum_of([43.0, 57.0, 71.0], [20.0, 40.0, 40.0])
    assert len(spectrum) == 3
    assert spectrum.base_peak == (57.0, 40.0)
    assert spectrum.total_ion_current == 100.0
    assert spectrum.relative_intensity.tolist() == [50.0, 100.0, 100.0]


@pytest.mark.parametrize("scale", [5e-324, 1e-300, 1.0, MAX_INTENSITY])
def test_quantities_stay_finite_at_any_intensity_that_is_accepted(scale: float) -> None:
    spectrum = spectrum_of(np.arange(1.0, 2001.0), np.full(2000, scale))
    with np.errstate(over="raise", invalid="raise"):
        assert spectrum.relative_intensity.tolist() == [100.0] * 2000
        assert np.isfinite(spectrum.total_ion_current)


@settings(deadline=None)
@given(st.lists(st.floats(0.0, 1e12), min_size=1, max_size=20).filter(any))
def test_the_base_peak_is_100(heights: list[float]) -> None:
    spectrum = spectrum_of(np.arange(1.0, len(heights) + 1.0), heights)
    assert spectrum.relative_intensity.max() == 100.0
    assert spectrum.base_peak[1] == max(heights)


@pytest.mark.parametrize(
    "values",
    [
        {"mz_from": 300.0, "mz_to": 29.0},
        {"mz_from": 29.0, "mz_to": 29.0},
        {"mz_from": -1.0},
        {"mz_to": float("inf")},
        {"mz_from": float("nan"), "mz_to": 300.0},
        {"threshold": -1.0},
        {"electron_energy_ev": float("nan")},
        {"retention_time_s": -0.1},
        {"retention_index": float("inf")},
        {"scan_rate_hz": float("nan")},
        {"scan_rate_hz": -1.0},
        {"amount_on_column_ng": -1.0},
        {"source_temperature_c": float("nan")},
        {"source_temperature_c": -300.0},
    ],
    ids=str,
)
def test_impossible_measurements_are_refused(values: dict[str, Any]) -> None:
    with pytest.raises(InvalidValueError):
        Measurement(**values)


def test_nothing_is_invented_about_a_measurement() -> None:
    assert Measurement().known() == {}
    assert spectrum_of(MZ, INTENSITY).measurement == Measurement()
    assert Measurement(retention_time_s=0.0, sample="").known() == {"retention_time_s": 0.0, "sample": ""}


def test_overrides_replace_only_what_is_given_and_are_checked() -> None:
    read = Measurement(mz_from=29.0, mz_to=300.0, sample="a")
    assert read.with_overrides(mz_to=550.0, sample=None) == Measurement(mz_from=29.0, mz_to=550.0, sample="a")
    assert read.mz_to == 300.0
    with pytest.raises(InvalidValueError):
        read.with_overrides(mz_to=10.0)
    with pytest.raises(TypeError):
        read.with_overrides(no_such_field=1)


def test_a_spectrum_from_a_file_keeps_the_claims_of_the_file_verbatim() -> None:
    spectrum = spectrum_of(MZ, INTENSITY)
    source = SourceSpectrum("a.csv", 1, spectrum, title=" Hexanal ")
    assert (source.title, source.formula, source.notes) == (" Hexanal ", None, ())
