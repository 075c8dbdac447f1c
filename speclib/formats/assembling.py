"""From what a reader found (peaks with lines, labels, claims) to a `SourceSpectrum`, the same for every format."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

import numpy as np

from speclib.errors import InvalidSpectrumError, InvalidValueError
from speclib.formats.mass_accuracy import ADVICE, MassAccuracyUnknownError, decide_mass_accuracy
from speclib.formats.options import ReadOptions
from speclib.formats.text_document import TextDocument
from speclib.model.spectrum import MAX_MZ, MAX_PEAKS, MassAccuracy, Measurement, SourceSpectrum, Spectrum

MAX_RAW_CHARACTERS = 1_000_000
LOW_ENERGY_EV = 30.0
"""Below, fragmentation falls off steeply: such spectra are not to be held against those of 70 eV."""
_RANGE_MARGIN = 0.5
"""m/z; how far a peak may lie outside the stated range before it is remarked: unit m/z are rounded."""


@dataclass
class PeakRows:
    """Peaks in the order of the file, each with the line it stands in; three lists of equal length."""

    mz: list[float] = field(default_factory=list)
    intensity: list[float] = field(default_factory=list)
    line: list[int] = field(default_factory=list)

    def add(self, mz: float, intensity: float, line: int) -> None:
        """Append one peak."""
        self.mz.append(mz)
        self.intensity.append(intensity)
        self.line.append(line)

    def __len__(self) -> int:
        return len(self.mz)


@dataclass
class Labels:
    """What the labels of one spectrum say: fields of `Measurement`, claims, and everything kept verbatim."""

    measurement: dict[str, Any] = field(default_factory=dict)
    claims: dict[str, str] = field(default_factory=dict)
    names: list[str] = field(default_factory=list)
    mass_accuracy: MassAccuracy | None = None
    raw_fields: dict[str, str] = field(default_factory=dict)
    notes: list[str] = field(default_factory=list)

    def keep(self, key: str, value: str, line: int) -> None:
        """Keep a field verbatim; a key that is taken already gets the line number added."""
        self.raw_fields[f"{key} (line {line})" if key in self.raw_fields else key] = value


def assemble_spectrum(
    document: TextDocument, index: int, rows: PeakRows, labels: Labels, options: ReadOptions, *, line: int
) -> SourceSpectrum:
    """Sort, check and freeze one spectrum; `line` is where it begins in the file, `index` its number from 1.

    Raises:
        InputFileError: peaks that cannot be, the same m/z twice, an unclear mass accuracy, an empty scanned range.
    """
    _check_values(document, rows, line)
    order = np.argsort(np.array(rows.mz), kind="stable")
    mz = np.array(rows.mz)[order]
    intensity = np.array(rows.intensity)[order]
    _refuse_doubled(document, mz, [rows.line[i] for i in order])
    if sum(len(key) + len(value) for key, value in labels.raw_fields.items()) > MAX_RAW_CHARACTERS:
        raise document.error(
            f"the labels hold more than {MAX_RAW_CHARACTERS} characters",
            line=line,
            advice="take out what is not needed",
        )
    try:
        accuracy, note = decide_mass_accuracy(rows.mz, options.mass_accuracy, labels.mass_accuracy)
    except MassAccuracyUnknownError as error:
        raise document.error(str(error), line=min(rows.line), advice=ADVICE) from error
    try:
        measurement = Measurement(**labels.measurement).with_overrides(mz_from=options.mz_from, mz_to=options.mz_to)
        spectrum = Spectrum(mz, intensity, accuracy, measurement, labels.raw_fields)
    except (InvalidSpectrumError, InvalidValueError) as error:
        raise document.error(error.message, line=line, advice=error.advice or "check the file") from error
    notes = (
        *document.notes,
        *labels.notes,
        *((note,) if note else ()),
        *_kept_apart(measurement),
        *_outside_range(spectrum),
    )
    return SourceSpectrum(file_name=document.file_name, index=index, spectrum=spectrum, notes=notes, **_claims(labels))


def _claims(labels: Labels) -> dict[str, Any]:
    claims: dict[str, Any] = {
        name: labels.claims.get(name) or None for name in ("title", "formula", "cas", "smiles", "inchikey")
    }
    return {**claims, "names": tuple(dict.fromkeys(labels.names))}


def _check_values(document: TextDocument, rows: PeakRows, line: int) -> None:
    if not len(rows):
        raise document.error(
            "the spectrum has no peaks", line=line, advice="give at least one line with m/z and intensity"
        )
    if len(rows) > MAX_PEAKS:
        raise too_many_peaks(document, rows.line[MAX_PEAKS])
    all_mz, all_intensity = np.array(rows.mz), np.array(rows.intensity)
    for at in np.flatnonzero(~((all_mz > 0) & (all_mz <= MAX_MZ)) | (all_intensity < 0)):
        mz, intensity, where = rows.mz[at], rows.intensity[at], rows.line[at]
        if not 0 < mz <= MAX_MZ:
            raise document.error(
                f"m/z {mz!r} must lie above 0 and at most at {MAX_MZ:g}",
                line=where,
                advice="check that the first column is m/z",
            )
        if intensity < 0:
            raise document.error(
                f"the intensity {intensity!r} of m/z {mz:g} is negative",
                line=where,
                advice="export the spectrum again without a subtraction that overshoots, or take the peak out",
            )


def too_many_peaks(document: TextDocument, line: int) -> Exception:
    """The refusal of a spectrum with more peaks than one may have."""
    return document.error(
        f"more than {MAX_PEAKS} peaks are not read", line=line, advice="centroid the data and export the spectrum again"
    )


def _refuse_doubled(document: TextDocument, mz: np.ndarray[Any, np.dtype[np.float64]], lines: list[int]) -> None:
    doubled = np.flatnonzero(np.diff(mz) == 0)
    if len(doubled):
        at = int(doubled[0])
        first, second = sorted((lines[at], lines[at + 1]))
        where = f"in lines {first} and {second}" if first != second else f"in line {first}"
        raise document.error(
            f"m/z {mz[at]!s} stands twice, {where}",
            place=f"line {second}",
            advice="keep one of them; give one spectrum a file",
        )


def _kept_apart(measurement: Measurement) -> tuple[str, ...]:
    """The remark on a spectrum that is no match for references of electron ionisation at 70 eV."""
    kinds = {"CI": "chemical ionisation", "CI-": "chemical ionisation, negative ions", "EI-": "negative ions"}
    what = kinds.get(measurement.ionisation or "", "")
    energy = measurement.electron_energy_ev
    if not what and energy is not None and energy < LOW_ENERGY_EV:
        what = f"ionisation by electrons of {energy:g} eV"
    return (f"this is {what}: it must not be mixed with 70 eV EI references",) if what else ()


def _outside_range(spectrum: Spectrum) -> tuple[str, ...]:
    measured = spectrum.measurement
    low = -np.inf if measured.mz_from is None else measured.mz_from - _RANGE_MARGIN
    high = np.inf if measured.mz_to is None else measured.mz_to + _RANGE_MARGIN
    mz = spectrum.mz
    outside = mz[(spectrum.intensity > 0) & ((mz < low) | (mz > high))]
    if not len(outside):
        return ()
    more = f" and {len(outside) - 1} more" if len(outside) > 1 else ""
    return (f"the peak at m/z {outside[0]:g}{more} lies outside the stated scanned range",)
