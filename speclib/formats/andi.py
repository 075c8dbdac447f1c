"""ANDI-MS (AIA) chromatographic runs in classic netCDF: read a run whole, and take one averaged spectrum out of it.

The file is read by scipy from bytes in memory; values are scaled and every index is checked here, because scipy slices
silently beyond the end. What belongs to no scan (flags behind the points) is left out. Only centroided full scans at
unit resolution become spectra; selected-ion and continuum data are refused.
"""

from __future__ import annotations

import hashlib
import io
import math
import struct
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from speclib.chemistry.unit_mass import assign_unit_masses
from speclib.errors import InputFileError, InvalidSpectrumError, InvalidValueError
from speclib.formats.assembling import LOW_ENERGY_EV, MAX_RAW_CHARACTERS
from speclib.formats.mass_accuracy import MassAccuracyUnknownError, decide_mass_accuracy
from speclib.formats.reading import read_file_bytes
from speclib.formats.text_document import shown, shown_name
from speclib.model.spectrum import MAX_MZ, MassAccuracy, Measurement, SourceSpectrum, Spectrum

__all__ = ["AndiRun", "averaged_spectrum", "is_andi", "read_andi_run", "read_andi_run_from_bytes"]

MAX_RUN_BYTES = 256 * 1024 * 1024
MAX_SCANS = 1_000_000
LARGEST_INTENSITY = 1e30
"""Far above any detector and below 9.97e36, the netCDF mark of a value never written."""
LARGEST_TIME_S = 1e7
MOST_SELECTED_IONS = 20
"""A run whose fullest scan has no more m/z than this is taken for selected ions; the project's own rule."""
FEWEST_SCANS_TO_TELL = 5
STORED_DECIMALS = 4
"""m/z are rounded to this: float32 holds about 4 decimals at m/z 500, and 27.05 must not read as 27.0499992."""
ROUNDING_S = 0.3
"""Times are given in minutes with two decimals: this much beyond the ends of the run is rounding."""

_MAGIC = (b"CDF\x01", b"CDF\x02")
_HDF5 = b"\x89HDF\r\n\x1a\n"
_TIME, _INDEX, _COUNT, _MASS, _INTENSITY = _NEEDED = (
    "scan_acquisition_time",
    "scan_index",
    "point_count",
    "mass_values",
    "intensity_values",
)
_MOST_READS = 100_000
"""Of scipy in one file; a run has some hundreds. Bounds the time that a hostile header can take."""
_SECONDS = ("", "s", "sec", "secs", "second", "seconds")
_MINUTES = ("min", "mins", "minute", "minutes")
_AGAIN = "export the run again as ANDI-MS (AIA, netCDF)"

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]


@dataclass(frozen=True, eq=False)
class AndiRun:
    """A run as the file holds it, after scaling; arrays are not writeable.

    Per scan, shape `(n_scans,)`: `scan_time_s` (seconds, not falling), `total_ion_current` (summed here, whatever the
    file says), `scan_index` (where the scan begins in `mz`), `point_count`. Points of all scans one after another,
    shape `(n_points,)`: `mz`, `intensity`. `mz_from`, `mz_to`, `ionisation`, `electron_energy_ev` are None unless the
    file states them. `raw_fields` are the global attributes verbatim; `notes` are remarks of the reader.
    """

    file_name: str
    sha256: str
    scan_time_s: Floats
    total_ion_current: Floats
    scan_index: Ints
    point_count: Ints
    mz: Floats
    intensity: Floats
    mz_from: float | None = None
    mz_to: float | None = None
    is_selected_ion: bool = False
    is_continuum: bool = False
    raw_fields: Mapping[str, str] = field(default_factory=dict)
    ionisation: str | None = None
    electron_energy_ev: float | None = None
    title: str | None = None
    notes: tuple[str, ...] = ()

    @property
    def limits_s(self) -> tuple[float, float]:
        """Times of the first and the last scan."""
        return float(self.scan_time_s[0]), float(self.scan_time_s[-1])


def is_andi(data: bytes) -> bool:
    """Whether bytes are a classic netCDF file that names the variables of an ANDI-MS run; says nothing of the rest."""
    return data.startswith(_MAGIC) and all(struct.pack(">i", len(name)) + name.encode() in data for name in _NEEDED)


def read_andi_run(path: Path) -> AndiRun:
    """Read a run.

    Raises:
        InputFileError: it cannot be opened, is no ANDI-MS run, or is damaged, inconsistent or too large.
    """
    data = read_file_bytes(path, MAX_RUN_BYTES, "export a part of the run")
    return read_andi_run_from_bytes(path.name or str(path), data)


def read_andi_run_from_bytes(file_name: str, data: bytes) -> AndiRun:
    """Read a run whose bytes are at hand; errors as `read_andi_run`."""
    with np.errstate(all="ignore"):  # every value is checked where it is used
        return _read(file_name, shown_name(file_name), data)


def _read(file_name: str, name: str, data: bytes) -> AndiRun:
    _check_signature(name, data)
    attributes, variables = _parse(name, data)
    raw = {key: _as_text(value) for key, value in attributes.items()}
    if sum(len(key) + len(value) for key, value in raw.items()) > MAX_RAW_CHARACTERS:
        raise _refusal(name, f"the attributes hold more than {MAX_RAW_CHARACTERS} characters", "global attributes")
    said = {key.lower(): value.strip() for key, value in raw.items()}
    if "library" in said.get("experiment_type", "").lower():
        raise InputFileError(
            name, "this is a library of spectra, not a run", place="experiment_type", advice="export it as JCAMP-DX"
        )
    times = _times(name, variables)
    start, count = _scan_limits(name, variables, len(times))
    mz, intensity = _points(name, variables, start, count)
    scan_of_point = np.repeat(np.arange(len(times)), count)
    mz_from, mz_to, range_notes = _stated_range(variables, said, len(times))
    ionisation, energy, ionisation_notes = _ionisation(said)
    return AndiRun(
        file_name=file_name,
        sha256=hashlib.sha256(data).hexdigest(),
        scan_time_s=_frozen(times),
        total_ion_current=_frozen(_summed(scan_of_point, intensity, len(times))),
        scan_index=_frozen_ints(np.cumsum(count) - count),
        point_count=_frozen_ints(count),
        mz=_frozen(mz),
        intensity=_frozen(intensity),
        mz_from=mz_from,
        mz_to=mz_to,
        is_selected_ion=_is_selected_ion(said, mz, scan_of_point, len(times)),
        is_continuum="continuum" in said.get("experiment_type", "").lower(),
        raw_fields=raw,
        ionisation=ionisation,
        electron_energy_ev=energy,
        title=said.get("experiment_title") or None,
        notes=(*range_notes, *ionisation_notes),
    )


def averaged_spectrum(
    run: AndiRun,
    at_s: float,
    width_s: float,
    background_s: tuple[float, float] | None = None,
    mass_accuracy: MassAccuracy | None = None,
) -> SourceSpectrum:
    """The mean of the scans within `at_s` +- `width_s` / 2 (at least the nearest), less the mean background scan.

    All times in seconds. The points of both windows are put on whole m/z along one mass-defect line and summed per
    whole number; what is not above 0 after the subtraction is dropped. `index` is the number of the nearest scan, from
    1. `mass_accuracy` answers what m/z with three or more decimals leave open.

    Raises:
        InvalidValueError: times that cannot be, or lie outside the run.
        InputFileError: selected-ion, continuum or accurate-mass data, no points there, nothing left.
    """
    name = shown_name(run.file_name)
    _refuse_unsearchable(run, name)
    _check_times(run, name, at_s, width_s, background_s)
    nearest = int(np.argmin(np.abs(run.scan_time_s - at_s)))
    scans = _scans_between(run, at_s - width_s / 2, at_s + width_s / 2)
    if not len(scans):
        scans = np.array([nearest])
    place = f"at {at_s / 60:.2f} min"
    below = np.zeros(0, dtype=np.int64) if background_s is None else _scans_between(run, *background_s)
    if background_s is not None and not len(below):
        raise InvalidValueError(
            f"{name} has no scan in the background {_window(*background_s)}", "give a wider background window"
        )
    mz, height = _mean_points(run, scans)
    background_mz, background_height = _mean_points(run, below)
    if not np.any(height > 0):
        raise InputFileError(name, "the scans have no points above 0", place=place, advice="give another time")
    accuracy_notes = _require_unit_mass(name, np.append(mz, background_mz), mass_accuracy, place)
    unit = _whole_numbers(np.append(mz, background_mz), np.append(height, background_height))
    net = _summed(unit, np.append(height, -background_height))
    # Rounding of equal sums must not leave a peak of 1e-12.
    noise = 1e-9 * _summed(unit, np.append(height, background_height))
    kept = np.flatnonzero(net > noise)
    kept = kept[(kept > 0) & (kept <= MAX_MZ)]
    if not len(kept):
        raise InputFileError(
            name, "nothing is left after the background is taken off", place=place, advice="give another background"
        )
    notes = (*run.notes, *accuracy_notes)
    if np.intersect1d(scans, below).size:
        notes = (*notes, "the background holds scans of the peak itself")
    try:
        measurement = Measurement(
            mz_from=run.mz_from,
            mz_to=run.mz_to,
            ionisation=run.ionisation,
            electron_energy_ev=run.electron_energy_ev,
            retention_time_s=at_s,
            scans_averaged=len(scans),
            background=None if background_s is None else _window(*background_s),
        )
        spectrum = Spectrum(kept.astype(np.float64), net[kept], MassAccuracy.UNIT, measurement, run.raw_fields)
    except (InvalidSpectrumError, InvalidValueError) as error:
        raise InputFileError(name, error.message, place=place, advice=error.advice or _AGAIN) from error
    return SourceSpectrum(
        file_name=run.file_name, index=nearest + 1, spectrum=spectrum, title=run.title, notes=tuple(notes)
    )


def _refusal(name: str, reason: str, place: str) -> InputFileError:
    return InputFileError(name, reason, place=place, advice=_AGAIN)


def _check_signature(name: str, data: bytes) -> None:
    if not data:
        raise InputFileError(name, "the file is empty", advice=_AGAIN)
    if len(data) > MAX_RUN_BYTES:
        raise InputFileError(
            name, f"the file is larger than {MAX_RUN_BYTES // 2**20} MiB", advice="export a part of the run"
        )
    if data.startswith((_HDF5, b"CDF\x05")):
        raise _refusal(name, "this is a newer kind of netCDF (HDF5 or 64-bit data), not the classic one", "first bytes")
    if not data.startswith(_MAGIC):
        raise _refusal(name, "this is no netCDF file", "first bytes")


class _BoundedBytes(io.BytesIO):
    """Bytes that end the reading when a header makes a reader fetch the same data over and over."""

    def __init__(self, data: bytes) -> None:
        super().__init__(data)
        self.bytes_left = 3 * len(data) + 4096
        self.reads_left = _MOST_READS

    def read(self, size: int | None = -1, /) -> bytes:
        piece = super().read(size)
        self.bytes_left -= len(piece)
        self.reads_left -= 1
        if self.bytes_left < 0 or self.reads_left < 0:
            raise ValueError("the header asks for more than the file holds")
        return piece


def _parse(name: str, data: bytes) -> tuple[dict[str, Any], dict[str, Any]]:
    """Global attributes, and the variables as scipy found them, by name."""
    from scipy.io import netcdf_file

    class QuietFile(netcdf_file):  # type: ignore[misc]
        """Attributes of the file never replace those of the object (`fp`, `mode`); nothing is written at its end."""

        def __setattr__(self, key: str, value: Any) -> None:
            held = self.__dict__
            held.get("_attributes", held)[key] = value

        def close(self) -> None:
            """Nothing to close: the bytes are in memory."""

        __del__ = close

    try:
        read = QuietFile(_BoundedBytes(data), "r", mmap=False, maskandscale=False)
        return dict(read.__dict__["_attributes"]), dict(read.__dict__["variables"])
    except Exception as error:
        raise _refusal(name, "the netCDF file is damaged or cut off", "header") from error


def _as_text(value: Any) -> str:
    if isinstance(value, bytes):
        return value.rstrip(b"\0 ").decode("latin-1")
    return " ".join(str(item) for item in np.ravel(value))


def _variable(name: str, variables: Mapping[str, Any], key: str) -> NDArray[Any]:
    """The stored numbers of a variable, one dimension, in the machine's byte order."""
    if key not in variables:
        raise InputFileError(name, f"the variable {key} of an ANDI-MS run is missing", place="variables", advice=_AGAIN)
    stored = np.asarray(variables[key].__dict__.get("data"))
    if stored.ndim != 1 or stored.dtype.kind not in "if":
        raise _refusal(name, "the variable is not one list of numbers", key)
    return stored.astype(stored.dtype.newbyteorder("="))


def _attribute(variables: Mapping[str, Any], key: str, attribute: str) -> Any:
    held = variables[key].__dict__.get("_attributes")
    return held.get(attribute) if isinstance(held, dict) else None


def _factor(name: str, variables: Mapping[str, Any], key: str, attribute: str, default: float) -> float:
    """A scale factor or offset; float32 is read by its shortest text, so that 0.05 is 0.05."""
    value = _attribute(variables, key, attribute)
    if value is None:
        return default
    try:
        number = float(_as_text(value))
    except ValueError:
        number = math.nan
    if not math.isfinite(number) or abs(number) > LARGEST_INTENSITY or (attribute == "scale_factor" and number <= 0):
        raise _refusal(name, f"the {attribute} {shown(_as_text(value))} cannot be used", key)
    return number


def _refuse_first(name: str, key: str, bad: NDArray[np.bool_], values: NDArray[Any], why: str, what: str) -> None:
    at = np.flatnonzero(bad)
    if len(at):
        raise _refusal(name, f"the value {values[at[0]].item()!r} {why}", f"{key}, {what} {int(at[0]) + 1}")


def _times(name: str, variables: Mapping[str, Any]) -> Floats:
    times = _variable(name, variables, _TIME).astype(np.float64)
    if not len(times):
        raise _refusal(name, "the run has no scans", _TIME)
    if len(times) > MAX_SCANS:
        raise _refusal(name, f"the run has more than {MAX_SCANS} scans", _TIME)
    unit = _as_text(_attribute(variables, _TIME, "units") or b"").strip().lower()
    if unit not in (*_SECONDS, *_MINUTES):
        raise _refusal(name, f"the unit of time {shown(unit)} is not known here", _TIME)
    bad = ~((times >= 0) & (times <= LARGEST_TIME_S))
    _refuse_first(name, _TIME, bad, times, "is no time of a run", "scan")
    _refuse_first(name, _TIME, np.diff(times, prepend=0.0) < 0, times, "lies before the scan ahead of it", "scan")
    return times * 60.0 if unit in _MINUTES else times


def _scan_limits(name: str, variables: Mapping[str, Any], n_scans: int) -> tuple[Ints, Ints]:
    """First point and number of points of each scan, held against the arrays of points and against each other."""
    n_points = len(_variable(name, variables, _MASS))
    other = len(_variable(name, variables, _INTENSITY))
    if other != n_points:
        raise _refusal(name, f"there are {n_points} m/z but {other} intensities", _INTENSITY)
    columns = []
    for key in (_INDEX, _COUNT):
        stored = _variable(name, variables, key)
        if len(stored) != n_scans:
            raise _refusal(name, f"there are {len(stored)} values for {n_scans} scans", key)
        bad = ~((stored >= 0) & (stored <= n_points) & (stored == np.rint(stored)))
        _refuse_first(name, key, bad, stored, f"does not fit a run of {n_points} points", "scan")
        columns.append(stored.astype(np.int64))
    start, count = columns
    beyond = start + count > n_points
    _refuse_first(name, _COUNT, beyond, count, f"reaches beyond the {n_points} points of the run", "scan")
    filled = np.flatnonzero(count)
    overlap = np.zeros(n_scans, dtype=bool)
    overlap[filled[1:]] = start[filled[1:]] < (start + count)[filled[:-1]]
    _refuse_first(name, _INDEX, overlap, start, "lies within the points of the scan ahead of it", "scan")
    if not len(filled):
        raise _refusal(name, "no scan has any points", _COUNT)
    return start, count


def _points(name: str, variables: Mapping[str, Any], start: Ints, count: Ints) -> tuple[Floats, Floats]:
    """m/z and intensities of the scans, one scan after another, scaled and checked."""
    at = np.repeat(start - (np.cumsum(count) - count), count) + np.arange(int(count.sum()))
    mz = _variable(name, variables, _MASS)[at].astype(np.float64)
    mz = np.round(mz * _factor(name, variables, _MASS, "scale_factor", 1.0), STORED_DECIMALS)
    intensity = _variable(name, variables, _INTENSITY)[at].astype(np.float64)
    intensity *= _factor(name, variables, _INTENSITY, "scale_factor", 1.0)
    intensity += _factor(name, variables, _INTENSITY, "add_offset", 0.0)
    why = f"is no m/z above 0 and at most {MAX_MZ:g}"
    _refuse_first(name, _MASS, ~((mz > 0) & (mz <= MAX_MZ)), mz, why, "point")
    bad = ~((intensity >= 0) & (intensity <= LARGEST_INTENSITY))
    _refuse_first(name, _INTENSITY, bad, intensity, "is no intensity of 0 or more", "point")
    return mz, intensity


def _stated_range(
    variables: Mapping[str, Any], said: Mapping[str, str], n_scans: int
) -> tuple[float | None, float | None, tuple[str, ...]]:
    """The scanned range: lowest and highest limit stated by scan, else those of the whole run, else unknown."""

    def by_scan(key: str) -> Floats:
        data = np.asarray(variables[key].__dict__.get("data")) if key in variables else np.zeros(0)
        if data.shape != (n_scans,) or data.dtype.kind not in "if":
            return np.zeros(0)
        values = np.round(data.astype(np.float64), STORED_DECIMALS)
        # -9999 and 9.97e36 mean: not known.
        return values[(values > 0) & (values <= MAX_MZ)]

    low, high = by_scan("mass_range_min"), by_scan("mass_range_max")
    if len(low) and len(high) and low.min() < high.max():
        varies = low.min() < low.max() or high.min() < high.max()
        note = "the m/z range that the file states varies from scan to scan; the widest was taken as the scanned range"
        return float(low.min()), float(high.max()), (note,) if varies else ()
    lowest, highest = _number(said.get("global_mass_min")), _number(said.get("global_mass_max"))
    if lowest is not None and highest is not None and 0 < lowest < highest <= MAX_MZ:
        return lowest, highest, ()
    return None, None, ()


def _number(text: str | None) -> float | None:
    try:
        number = float(text or "")
    except ValueError:
        return None
    return number if math.isfinite(number) else None


def _ionisation(said: Mapping[str, str]) -> tuple[str | None, float | None, tuple[str, ...]]:
    """Ionisation and electron energy as stated, with remarks on what is missing or must be kept apart."""
    mode, negative = said.get("test_ionization_mode", ""), "neg" in said.get("test_ionization_polarity", "").lower()
    kinds = {"electron impact": "EI", "ei": "EI", "chemical ionization": "CI", "ci": "CI"}
    kind = kinds.get(mode.lower())
    ionisation = (kind + "-" * negative if kind else mode) or None
    energy = _number(said.get("test_electron_energy"))
    energy = energy if energy is not None and 0 < energy <= 1e5 else None
    if ionisation is None:
        return None, energy, ("the ionisation is not stated; that it is EI at 70 eV was not assumed",)
    if ionisation != "EI":
        return ionisation, energy, (f"this is ionisation {ionisation}: it must not be mixed with 70 eV EI references",)
    if energy is not None and energy < LOW_ENERGY_EV:
        return ionisation, energy, (f"electrons of {energy:g} eV: it must not be mixed with 70 eV EI references",)
    return ionisation, energy, ()


def _is_selected_ion(said: Mapping[str, str], mz: Floats, scan_of_point: Ints, n_scans: int) -> bool:
    """The file says so, or the fullest of several scans has few different m/z."""
    if "selected ion" in said.get("test_scan_function", "").lower():
        return True
    if n_scans < FEWEST_SCANS_TO_TELL:
        return False
    whole = np.rint(mz).astype(np.int64)
    pairs = np.unique(scan_of_point * (int(MAX_MZ) + 1) + whole)
    return int(np.bincount(pairs // (int(MAX_MZ) + 1)).max()) <= MOST_SELECTED_IONS


def _frozen(values: Floats) -> Floats:
    values.setflags(write=False)
    return values


def _frozen_ints(values: Ints) -> Ints:
    values.setflags(write=False)
    return values


def _summed(place: NDArray[np.integer[Any]], values: Floats, places: int = 0) -> Floats:
    """The sum of the values that belong to each place from 0."""
    return np.bincount(place, weights=values, minlength=places).astype(np.float64)


def _refuse_unsearchable(run: AndiRun, name: str) -> None:
    if run.is_selected_ion:
        raise InputFileError(
            name,
            "this run holds selected ions (SIM), not whole spectra: it cannot be searched",
            advice="measure again in full scan",
        )
    if run.is_continuum:
        raise InputFileError(
            name,
            "this run holds continuum data, which are not averaged here",
            place="experiment_type",
            advice="export it centroided",
        )


def _check_times(
    run: AndiRun, name: str, at_s: float, width_s: float, background_s: tuple[float, float] | None
) -> None:
    first, last = run.limits_s
    limits = f"give a time within the run, {first / 60:.2f} to {last / 60:.2f} min"
    for time in (at_s, *(background_s or ())):
        if not first - ROUNDING_S <= time <= last + ROUNDING_S or time < 0:
            raise InvalidValueError(f"{time / 60:.2f} min lies outside the run {name}", limits)
    if not (math.isfinite(width_s) and width_s >= 0):
        raise InvalidValueError(f"a width of {width_s} s cannot be", "give 0 or more seconds")
    if background_s is not None and background_s[0] > background_s[1]:
        raise InvalidValueError(f"the background {_window(*background_s)} ends before it begins", "give FROM..TO")


def _window(from_s: float, to_s: float) -> str:
    decimals = 2 if abs(to_s - from_s) >= 0.6 else 4
    return f"{from_s / 60:.{decimals}f}-{to_s / 60:.{decimals}f} min"


def _scans_between(run: AndiRun, from_s: float, to_s: float) -> Ints:
    """Positions of the scans of a window, both ends included."""
    slack = 1e-9 * max(1.0, abs(to_s))
    within = (run.scan_time_s >= from_s - slack) & (run.scan_time_s <= to_s + slack)
    return np.flatnonzero(within).astype(np.int64)


def _mean_points(run: AndiRun, scans: Ints) -> tuple[Floats, Floats]:
    """Different m/z of these scans, rising, and their summed intensity per scan; a scan without the m/z counts as 0."""
    if not len(scans):
        return np.zeros(0), np.zeros(0)
    at = np.concatenate(
        [np.arange(s, s + n) for s, n in zip(run.scan_index[scans], run.point_count[scans], strict=True)]
    )
    mz, position = np.unique(run.mz[at], return_inverse=True)
    return mz, _summed(position, run.intensity[at]) / len(scans)


def _require_unit_mass(name: str, mz: Floats, said: MassAccuracy | None, place: str) -> tuple[str, ...]:
    try:
        accuracy, note = decide_mass_accuracy((float(value) for value in np.unique(mz)), said, None)
    except MassAccuracyUnknownError as error:
        raise InputFileError(
            name, str(error), place=place, advice="say --mass-accuracy unit if it is a unit-resolution run"
        ) from error
    if accuracy is not MassAccuracy.UNIT:
        raise InputFileError(
            name,
            "runs of accurate mass are not averaged here",
            place=place,
            advice="average the scans in the instrument's software and export JCAMP-DX or text",
        )
    return (note,) if note else ()


def _whole_numbers(mz: Floats, height: Floats) -> Ints:
    """Whole numbers of the points of both windows, in their order, along one line for both."""
    rising, position = np.unique(mz, return_inverse=True)
    return np.maximum(assign_unit_masses(rising, _summed(position, height)).unit_mz, 0)[position]
