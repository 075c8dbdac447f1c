"""ANDI-MS runs: invented netCDF files, written by scipy, with two peaks over a bleeding background."""

from __future__ import annotations

import warnings
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from speclib.errors import InputFileError, InvalidValueError
from speclib.formats import andi
from speclib.formats.andi import AndiRun, averaged_spectrum, is_andi, read_andi_run, read_andi_run_from_bytes
from speclib.formats.reading import read_spectra
from speclib.model.spectrum import MassAccuracy

N_SCANS = 60
FIRST_S, STEP_S = 240.0, 1.0
FIRST_PEAK = {43: 100.0, 58: 40.0, 71: 20.0, 100: 10.0}
SECOND_PEAK = {77: 50.0, 105: 100.0, 122: 70.0}
BLEED = {73: 30.0, 207: 100.0, 281: 50.0}
NOISE = dict.fromkeys(range(35, 65), 1.0)
ATTRIBUTES: dict[str, Any] = {
    "dataset_completeness": "C1+C2",
    "ms_template_revision": "1.0.1",
    "experiment_title": "invented run",
    "experiment_type": "Centroided Mass Spectrum",
    "test_ionization_mode": "Electron Impact",
    "test_ionization_polarity": "Positive Polarity",
    "test_electron_energy": np.float64(70.0),
    "test_scan_function": "Mass Scan",
}


def scan_of(position: int) -> dict[int, float]:
    """Background everywhere; the first peak in scans 19 to 21, the second in scan 40."""
    scan = {**NOISE, **BLEED}
    height = {19: 5.0, 20: 10.0, 21: 5.0}.get(position, 0.0)
    for mz, intensity in (*FIRST_PEAK.items(), *(SECOND_PEAK.items() if position == 40 else ())):
        share = height * intensity if mz in FIRST_PEAK else intensity
        if share:
            scan[mz] = scan.get(mz, 0.0) + share
    return scan


ALL_SCANS = [scan_of(i) for i in range(N_SCANS)]


def write_run(
    path: Path,
    scans: list[dict[int, float]] | None = None,
    *,
    attributes: Mapping[str, Any] = ATTRIBUTES,
    replaced: Mapping[str, Any] | None = None,
    without: tuple[str, ...] = (),
    version: int = 1,
    flags: int = 0,
    mass_type: str = "f4",
    mass_scale: float = 1.0,
    mass_shift: float = 0.0,
    intensity_type: str = "f4",
    intensity_scale: float = 1.0,
    intensity_offset: float = 0.0,
    mass_range: tuple[float, float] | None = (34.7, 450.0),
    time_unit: str = "Seconds",
    unlimited: bool = False,
) -> Path:
    """An invented ANDI-MS file; `flags` unused values stand behind the points of each scan."""
    from scipy.io import netcdf_file

    scans = ALL_SCANS if scans is None else scans
    index: list[int] = []
    mz: list[float] = []
    intensity: list[float] = []
    for scan in scans:
        index.append(len(mz))
        mz += [*(at + mass_shift for at in sorted(scan)), *([-9999] * flags)]
        intensity += [*(scan[at] for at in sorted(scan)), *([-9999] * flags)]
    time = FIRST_S + STEP_S * np.arange(len(scans))
    values: dict[str, tuple[str, str, Any]] = {
        "scan_acquisition_time": ("f8", "scan_number", time / (60.0 if time_unit.startswith("min") else 1.0)),
        "scan_index": ("i4", "scan_number", index),
        "point_count": ("i4", "scan_number", [len(scan) for scan in scans]),
        "flag_count": ("i4", "scan_number", [flags] * len(scans)),
        "total_intensity": ("f8", "scan_number", [-9999.0] * len(scans)),
        "mass_values": (mass_type, "point_number", np.array(mz) / mass_scale),
        "intensity_values": (
            intensity_type,
            "point_number",
            (np.array(intensity) - intensity_offset) / intensity_scale,
        ),
    }
    if mass_range is not None:
        values["mass_range_min"] = ("f8", "scan_number", [mass_range[0]] * len(scans))
        values["mass_range_max"] = ("f8", "scan_number", [mass_range[1]] * len(scans))
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        file = netcdf_file(str(path), "w", version=version)
        file.createDimension("point_number", None if unlimited else len(mz))
        file.createDimension("scan_number", len(scans))
        # Not set on the object, which an attribute named `fp` would break.
        file.__dict__["_attributes"].clear()
        file.__dict__["_attributes"].update(attributes)
        for key, (kind, dimension, stored) in values.items():
            if key in without:
                continue
            stored = np.array((replaced or {}).get(key, stored))
            if kind.startswith("i"):
                stored = np.rint(stored)
            variable = file.createVariable(key, kind, (dimension,))
            variable[:] = stored
            if key == "scan_acquisition_time":
                variable.units = time_unit
            if key == "mass_values" and mass_scale != 1.0:
                variable.scale_factor = np.float32(mass_scale)
            if key == "intensity_values" and (intensity_scale, intensity_offset) != (1.0, 0.0):
                variable.scale_factor = np.float64(intensity_scale)
                variable.add_offset = np.float64(intensity_offset)
        file.close()
    return path


@pytest.fixture
def run_file(tmp_path: Path) -> Path:
    return write_run(tmp_path / "run.cdf")


@pytest.fixture
def run(run_file: Path) -> AndiRun:
    return read_andi_run(run_file)


def peaks(source: Any) -> dict[float, float]:
    return {float(m): round(float(i), 6) for m, i in zip(source.spectrum.mz, source.spectrum.intensity, strict=True)}


def test_a_run_is_read_whole(run: AndiRun) -> None:
    assert run.file_name == "run.cdf"
    assert len(run.sha256) == 64
    assert run.limits_s == (240.0, 299.0)
    assert run.total_ion_current.tolist() == [sum(scan.values()) for scan in ALL_SCANS]
    assert run.point_count.tolist() == [len(scan) for scan in ALL_SCANS]
    start, count = run.scan_index[40], run.point_count[40]
    assert dict(zip(run.mz[start : start + count], run.intensity[start : start + count], strict=True)) == ALL_SCANS[40]
    assert not run.is_selected_ion
    assert run.raw_fields["test_scan_function"] == "Mass Scan"
    assert run.raw_fields["test_electron_energy"] == "70.0"
    assert (run.ionisation, run.electron_energy_ev, run.mz_from, run.mz_to) == ("EI", 70.0, 34.7, 450.0)
    assert run.notes == ()
    assert not run.mz.flags.writeable


@pytest.mark.parametrize(
    "variant",
    [
        {"version": 2},
        {"flags": 3},
        {"mass_type": "i2", "mass_scale": 0.05, "flags": 0},
        {"intensity_type": "i4", "intensity_scale": 0.5, "intensity_offset": 1.0},
        {"intensity_type": "f8", "mass_type": "f8"},
        {"time_unit": "minutes"},
        {"unlimited": True},
    ],
    ids=str,
)
def test_every_way_of_storing_gives_the_same_run(tmp_path: Path, run: AndiRun, variant: dict[str, Any]) -> None:
    other = read_andi_run(write_run(tmp_path / "other.cdf", **variant))
    assert np.array_equal(other.mz, run.mz)
    assert np.array_equal(other.intensity, run.intensity)
    assert np.array_equal(other.scan_index, run.scan_index)
    assert np.allclose(other.scan_time_s, run.scan_time_s, rtol=1e-12)


def test_the_mean_of_three_scans(run: AndiRun) -> None:
    found = averaged_spectrum(run, 260.0, 2.0)
    expected = {mz: float(np.mean([scan.get(mz, 0.0) for scan in ALL_SCANS[19:22]])) for mz in ALL_SCANS[20]}
    assert peaks(found) == pytest.approx(expected, rel=1e-6)
    measured = found.spectrum.measurement
    assert (measured.scans_averaged, measured.background, measured.retention_time_s) == (3, None, 260.0)
    assert (measured.mz_from, measured.mz_to, measured.ionisation) == (34.7, 450.0, "EI")
    assert (found.index, found.title, found.file_name) == (21, "invented run", "run.cdf")
    assert found.spectrum.raw_fields["experiment_title"] == "invented run"


def test_the_background_is_taken_off_and_what_is_not_above_zero_is_dropped(run: AndiRun) -> None:
    found = averaged_spectrum(run, 260.0, 0.0, (246.0, 252.0))
    assert peaks(found) == {mz: 10 * intensity for mz, intensity in FIRST_PEAK.items()}
    assert found.spectrum.measurement.background == "4.10-4.20 min"
    assert found.spectrum.measurement.scans_averaged == 1
    assert peaks(averaged_spectrum(run, 280.0, 0.5, (282.0, 290.0))) == SECOND_PEAK


def test_at_least_the_nearest_scan_is_taken(run: AndiRun) -> None:
    found = averaged_spectrum(run, 280.4, 0.1)
    assert (found.index, found.spectrum.measurement.scans_averaged) == (41, 1)


def test_an_empty_scan_counts_in_the_mean(tmp_path: Path) -> None:
    run = read_andi_run(write_run(tmp_path / "gap.cdf", [*ALL_SCANS[:19], {}, *ALL_SCANS[20:]]))
    found = averaged_spectrum(run, 259.5, 1.0)
    assert run.total_ion_current[19] == 0
    assert found.spectrum.measurement.scans_averaged == 1 + 1
    assert peaks(found)[207.0] == 50.0


def test_fractions_are_put_on_whole_numbers_with_a_note(tmp_path: Path) -> None:
    run = read_andi_run(write_run(tmp_path / "shifted.cdf", mass_shift=0.05))
    found = averaged_spectrum(run, 260.0, 0.0, (246.0, 252.0))
    assert peaks(found) == {mz: 10 * intensity for mz, intensity in FIRST_PEAK.items()}
    assert any("2 decimals" in note for note in found.notes)


def test_accurate_masses_are_asked_about_and_not_averaged(tmp_path: Path) -> None:
    run = read_andi_run(write_run(tmp_path / "accurate.cdf", mass_shift=0.0312, mass_type="f8"))
    with pytest.raises(InputFileError, match="--mass-accuracy"):
        averaged_spectrum(run, 260.0, 0.0)
    with pytest.raises(InputFileError, match="accurate mass"):
        averaged_spectrum(run, 260.0, 0.0, None, MassAccuracy.ACCURATE)
    assert 43.0 in peaks(averaged_spectrum(run, 260.0, 0.0, None, MassAccuracy.UNIT))


def test_a_background_that_holds_the_peak_is_remarked(run: AndiRun) -> None:
    assert any("peak itself" in note for note in averaged_spectrum(run, 260.0, 0.0, (255.0, 262.0)).notes)


@pytest.mark.parametrize(
    ("changes", "expected", "note"),
    [
        ({"test_ionization_mode": None, "test_electron_energy": None}, (None, None), "was not assumed"),
        ({"test_ionization_mode": "Chemical Ionization"}, ("CI", 70.0), "must not be mixed"),
        ({"test_ionization_polarity": "Negative Polarity"}, ("EI-", 70.0), "must not be mixed"),
        ({"test_ionization_mode": "Field Ionization"}, ("Field Ionization", 70.0), "must not be mixed"),
        ({"test_electron_energy": np.float64(12.0)}, ("EI", 12.0), "must not be mixed"),
        ({"test_electron_energy": np.float64(-9999.0)}, ("EI", None), ""),
        ({"test_ionization_mode": b"ELECTRON IMPACT \0"}, ("EI", 70.0), ""),
    ],
)
def test_ionisation_is_what_the_file_states(
    tmp_path: Path, changes: dict[str, Any], expected: tuple[Any, Any], note: str
) -> None:
    attributes = {key: value for key, value in {**ATTRIBUTES, **changes}.items() if value is not None}
    found = averaged_spectrum(read_andi_run(write_run(tmp_path / "a.cdf", attributes=attributes)), 260.0, 0.0)
    measured = found.spectrum.measurement
    assert (measured.ionisation, measured.electron_energy_ev) == expected
    assert any(note in held for held in found.notes) if note else found.notes == ()


def test_an_unstated_range_stays_unknown(tmp_path: Path) -> None:
    for limits in (None, (-9999.0, -9999.0), (9.96921e36, 9.96921e36)):
        run = read_andi_run(write_run(tmp_path / "a.cdf", mass_range=limits))
        assert (run.mz_from, run.mz_to) == (None, None)
    stated = {**ATTRIBUTES, "global_mass_min": np.float64(40.0), "global_mass_max": np.float64(400.0)}
    run = read_andi_run(write_run(tmp_path / "a.cdf", mass_range=None, attributes=stated))
    assert (run.mz_from, run.mz_to) == (40.0, 400.0)


def test_a_range_that_varies_is_remarked(tmp_path: Path) -> None:
    lows = [40.0] * 30 + [35.0] * 30
    run = read_andi_run(write_run(tmp_path / "a.cdf", replaced={"mass_range_min": lows}))
    assert (run.mz_from, run.mz_to) == (35.0, 450.0)
    assert "varies" in run.notes[0]


def test_selected_ions_are_refused(tmp_path: Path) -> None:
    said = {**ATTRIBUTES, "test_scan_function": "SELECTED ION DETECTION"}
    few = [{91: 10.0, 92: 6.0, 65: 1.0}] * 30
    for number, path in enumerate((write_run(tmp_path / "s.cdf", attributes=said), write_run(tmp_path / "f.cdf", few))):
        run = read_andi_run(path)
        assert run.is_selected_ion, number
        with pytest.raises(InputFileError, match=r"selected ions.*cannot be searched"):
            averaged_spectrum(run, 250.0, 1.0)


def test_continuum_data_and_libraries_are_refused(tmp_path: Path) -> None:
    continuum = {**ATTRIBUTES, "experiment_type": "Continuum Mass Spectrum"}
    with pytest.raises(InputFileError, match="continuum"):
        averaged_spectrum(read_andi_run(write_run(tmp_path / "c.cdf", attributes=continuum)), 260.0, 0.0)
    library = {**ATTRIBUTES, "experiment_type": "Library Mass Spectrum"}
    with pytest.raises(InputFileError, match="library of spectra"):
        read_andi_run(write_run(tmp_path / "l.cdf", attributes=library))


@pytest.mark.parametrize(
    ("at", "width", "background", "says"),
    [
        (10.0, 1.0, None, r"outside the run run\.cdf.*4\.00 to 4\.98 min"),
        (400.0, 1.0, None, "4.98 min"),
        (float("nan"), 1.0, None, "outside the run"),
        (260.0, -1.0, None, "width"),
        (260.0, float("inf"), None, "width"),
        (260.0, 1.0, (100.0, 250.0), "outside the run"),
        (260.0, 1.0, (252.0, 246.0), "ends before it begins"),
        (260.0, 1.0, (250.2, 250.6), "no scan in the background"),
    ],
)
def test_times_that_cannot_be_are_refused(
    run: AndiRun, at: float, width: float, background: tuple[float, float] | None, says: str
) -> None:
    with pytest.raises(InvalidValueError, match=says):
        averaged_spectrum(run, at, width, background)


def test_nothing_left_is_said(run: AndiRun) -> None:
    with pytest.raises(InputFileError, match="nothing is left"):
        averaged_spectrum(run, 250.0, 2.0, (245.0, 248.0))


def test_scans_without_points_are_said(tmp_path: Path) -> None:
    run = read_andi_run(write_run(tmp_path / "gap.cdf", [*ALL_SCANS[:30], {}, {}, {}, *ALL_SCANS[33:]]))
    with pytest.raises(InputFileError, match="no points above 0"):
        averaged_spectrum(run, 271.0, 2.0)


def changed(key: str, position: int, value: float) -> dict[str, Any]:
    """The values of a variable of the invented run with one of them replaced."""
    counts = [len(scan) for scan in ALL_SCANS]
    held: dict[str, Any] = {
        "scan_acquisition_time": FIRST_S + STEP_S * np.arange(N_SCANS),
        "scan_index": np.cumsum(counts) - counts,
        "point_count": counts,
        "mass_values": [mz for scan in ALL_SCANS for mz in sorted(scan)],
        "intensity_values": [scan[mz] for scan in ALL_SCANS for mz in sorted(scan)],
    }
    values = np.array(held[key], dtype=float)
    values[position] = value
    return {key: values}


@pytest.mark.parametrize(
    ("replaced", "says"),
    [
        (changed("scan_index", 5, -1), "scan_index, scan 6"),
        (changed("scan_index", 5, 1e8), "scan_index, scan 6"),
        (changed("scan_index", 5, 100), "scan ahead of it"),
        (changed("point_count", 5, -9999), "point_count, scan 6"),
        (changed("point_count", 59, 34), "beyond the"),
        (changed("point_count", 5, 40), "scan_index, scan 7"),
        ({"point_count": [0] * N_SCANS}, "no scan has any points"),
        (changed("scan_acquisition_time", 3, float("nan")), "scan_acquisition_time, scan 4"),
        (changed("scan_acquisition_time", 3, -1), "scan_acquisition_time, scan 4"),
        (changed("scan_acquisition_time", 3, 241), "scan ahead of it"),
        (changed("mass_values", 7, float("nan")), "mass_values, point 8"),
        (changed("mass_values", 7, 0), "mass_values, point 8"),
        (changed("mass_values", 7, 20000), "mass_values, point 8"),
        (changed("intensity_values", 7, -1), "intensity_values, point 8"),
        (changed("intensity_values", 7, float("inf")), "intensity_values, point 8"),
        (changed("intensity_values", 7, 9.96921e36), "intensity_values, point 8"),
    ],
)
def test_values_that_cannot_be_are_refused_with_their_place(
    tmp_path: Path, replaced: dict[str, Any], says: str
) -> None:
    with pytest.raises(InputFileError, match=says) as caught:
        read_andi_run(write_run(tmp_path / "bad.cdf", replaced=replaced))
    assert caught.value.advice
    assert "\n" not in str(caught.value)


@pytest.mark.parametrize(
    "key", ["scan_acquisition_time", "scan_index", "point_count", "mass_values", "intensity_values"]
)
def test_a_missing_variable_is_named(tmp_path: Path, key: str) -> None:
    path = write_run(tmp_path / "bad.cdf", without=(key,))
    assert not is_andi(path.read_bytes())
    with pytest.raises(InputFileError, match=key):
        read_andi_run(path)


def test_other_content_is_refused(tmp_path: Path, run_file: Path) -> None:
    data = run_file.read_bytes()
    for content, says in (
        (b"", "empty"),
        (b"##TITLE=x", "no netCDF"),
        (b"\x89HDF\r\n\x1a\n" + bytes(50), "HDF5"),
        (b"CDF\x05" + data[4:], "classic"),
        (data[:200], "damaged"),
        (data[:-500], "damaged"),
        (b"CDF\x01", "damaged"),
    ):
        with pytest.raises(InputFileError, match=says):
            read_andi_run_from_bytes("x.cdf", content)
    for path, says in ((tmp_path, "folder"), (tmp_path / "none.cdf", "does not exist")):
        with pytest.raises(InputFileError, match=says):
            read_andi_run(path)


def test_units_and_factors_that_cannot_be_are_refused(tmp_path: Path) -> None:
    with pytest.raises(InputFileError, match="unit of time"):
        read_andi_run(write_run(tmp_path / "a.cdf", time_unit="fortnights"))
    with pytest.raises(InputFileError, match="scale_factor"):
        read_andi_run(write_run(tmp_path / "a.cdf", intensity_scale=-1.0))


def test_a_large_file_is_refused(run_file: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(andi, "MAX_RUN_BYTES", 1000)
    with pytest.raises(InputFileError, match="larger than"):
        read_andi_run(run_file)


@pytest.mark.parametrize("key", ["fp", "mode", "variables", "_dims", "_read_var_array", "_attributes", "close"])
def test_attributes_that_bear_the_names_of_python_do_no_harm(tmp_path: Path, run: AndiRun, key: str) -> None:
    other = read_andi_run(write_run(tmp_path / "x.cdf", attributes={**ATTRIBUTES, key: "w"}))
    assert other.raw_fields[key] == "w"
    assert np.array_equal(other.mz, run.mz)


def test_a_header_that_names_the_same_data_many_times_is_refused() -> None:
    def number(value: int) -> bytes:
        return value.to_bytes(4, "big")

    size, count = 100_000, 5_000
    dimension = number(10) + number(1) + number(1) + b"n\0\0\0" + number(size)
    one = [
        number(4) + b"%04d" % i + number(1) + number(0) + bytes(8) + number(1) + number(size) + number(100)
        for i in range(count)
    ]
    data = b"CDF\x01" + bytes(4) + dimension + bytes(8) + number(11) + number(count) + b"".join(one) + bytes(size)
    with pytest.raises(InputFileError, match="damaged") as caught:
        read_andi_run_from_bytes("x.cdf", data)
    assert "more than the file holds" in str(caught.value.__cause__)


def test_a_run_is_known_by_its_content(run_file: Path) -> None:
    assert is_andi(run_file.read_bytes())
    assert not is_andi(b"CDF\x01" + bytes(100))
    assert not is_andi(b"")
    with pytest.raises(InputFileError, match=r"netCDF.*--at"):
        read_spectra(run_file)


@pytest.fixture(scope="module")
def small_run(tmp_path_factory: pytest.TempPathFactory) -> bytes:
    return write_run(tmp_path_factory.mktemp("andi") / "s.cdf", ALL_SCANS[17:23], unlimited=False).read_bytes()


@settings(deadline=None, max_examples=300)
@given(
    changes=st.lists(
        st.tuples(st.floats(0, 1, exclude_max=True), st.sampled_from([1, 2, 4, 8]), st.binary(min_size=8, max_size=8)),
        max_size=4,
    ),
    in_header=st.booleans(),
    cut=st.one_of(st.none(), st.floats(0, 1)),
)
def test_damage_gives_a_run_or_a_refusal(
    small_run: bytes, changes: list[tuple[float, int, bytes]], in_header: bool, cut: float | None
) -> None:
    data = bytearray(small_run)
    for place, length, piece in changes:
        at = 4 + int(place * ((1800 if in_header else len(data)) - 4))
        data[at : at + length] = piece[:length]
    content = bytes(data) if cut is None else bytes(data[: int(cut * len(data))])
    is_andi(content)
    try:
        run = read_andi_run_from_bytes("x.cdf", content)
        found = averaged_spectrum(run, run.limits_s[0], 2.0, run.limits_s, MassAccuracy.UNIT)
    except (InputFileError, InvalidValueError) as error:
        refusal = error
    else:
        assert np.all(found.spectrum.intensity > 0)
        return
    assert refusal.advice
    assert "\n" not in str(refusal)


@settings(deadline=None, max_examples=100)
@given(st.binary(max_size=300))
def test_any_bytes_behind_the_magic_are_refused(content: bytes) -> None:
    with pytest.raises(InputFileError):
        read_andi_run_from_bytes("x.cdf", b"CDF\x01" + content)
