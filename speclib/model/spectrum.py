"""A mass spectrum and what is recorded of its measurement. Nothing is invented: what is not known is None."""

from __future__ import annotations

import hashlib
from collections.abc import Mapping
from dataclasses import dataclass, field, fields
from enum import StrEnum
from functools import cached_property
from types import MappingProxyType
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from speclib.errors import InvalidSpectrumError, InvalidValueError

MAX_PEAKS = 200_000
MAX_MZ = 10_000.0
MAX_INTENSITY = 1e300
"""Far above any detector; sums and percentages stay within float64."""


class MassAccuracy(StrEnum):
    """How m/z are to be read: whole numbers, or measured to a few mDa."""

    UNIT = "unit"
    ACCURATE = "accurate"


class PhaseChemistry(StrEnum):
    """Stationary phases by chemistry, the only way in which retention indices are compared."""

    METHYL = "100% methyl"
    PHENYL = "5% phenyl"
    POLYETHYLENE_GLYCOL = "polyethylene glycol"
    CYANOPROPYL = "cyanopropyl"
    OTHER = "other"


@dataclass(frozen=True)
class Measurement:
    """How a spectrum was measured; every field may be unknown (None). Units stand in the names."""

    mz_from: float | None = None
    mz_to: float | None = None
    threshold: float | None = None
    ionisation: str | None = None
    electron_energy_ev: float | None = None
    analyser: str | None = None
    source_temperature_c: float | None = None
    scan_rate_hz: float | None = None
    carrier_gas: str | None = None
    column: str | None = None
    phase: str | None = None
    programme: str | None = None
    method: str | None = None
    inlet: str | None = None
    solvent: str | None = None
    derivatisation: str | None = None
    amount_on_column_ng: float | None = None
    retention_time_s: float | None = None
    retention_index: float | None = None
    instrument: str | None = None
    analyst: str | None = None
    acquired_at: str | None = None
    scans_averaged: int | None = None
    background: str | None = None
    blank: str | None = None
    sample: str | None = None
    comment: str | None = None

    def __post_init__(self) -> None:
        if self.mz_from is not None and self.mz_to is not None and self.mz_from >= self.mz_to:
            raise InvalidValueError(
                f"a scanned range from {self.mz_from:g} to {self.mz_to:g} is empty",
                "give mz_from below mz_to",
            )
        for name in (
            "mz_from",
            "mz_to",
            "threshold",
            "electron_energy_ev",
            "scan_rate_hz",
            "amount_on_column_ng",
            "retention_time_s",
            "retention_index",
        ):
            value = getattr(self, name)
            if value is not None and not 0 <= value < float("inf"):
                raise InvalidValueError(f"{name} cannot be {value}", "give a finite number of 0 or more")
        if self.source_temperature_c is not None and not -273.15 <= self.source_temperature_c < float("inf"):
            raise InvalidValueError(
                f"source_temperature_c cannot be {self.source_temperature_c}", "give degrees Celsius"
            )

    def with_overrides(self, **values: Any) -> Measurement:
        """A copy in which every value that is not None replaces the one held."""
        held = {f.name: getattr(self, f.name) for f in fields(self)}
        return Measurement(**{**held, **{name: value for name, value in values.items() if value is not None}})

    def known(self) -> dict[str, Any]:
        """The fields that are known, by name."""
        return {f.name: value for f in fields(self) if (value := getattr(self, f.name)) is not None}


def _frozen(values: ArrayLike, name: str) -> NDArray[np.float64]:
    try:
        # Adding 0 turns -0.0 into 0.0: equal spectra have equal bytes.
        array = np.array(values, dtype=np.float64) + 0.0
    except (TypeError, ValueError) as error:
        raise InvalidSpectrumError(f"{name} must be a list of numbers ({error})") from error
    if array.ndim != 1:
        raise InvalidSpectrumError(f"{name} must be one list of numbers, not {array.ndim} dimensions")
    array.setflags(write=False)
    return array


@dataclass(frozen=True, eq=False)
class Spectrum:
    """Peaks as read: `mz` and `intensity`, shape `(n_peaks,)`, float64, m/z strictly rising; arrays are not writeable.

    Raises:
        InvalidSpectrumError: no peaks, unequal lengths, non-finite or negative values, m/z not rising, nothing above 0.
    """

    mz: NDArray[np.float64]
    intensity: NDArray[np.float64]
    mass_accuracy: MassAccuracy = MassAccuracy.UNIT
    measurement: Measurement = field(default_factory=Measurement)
    raw_fields: Mapping[str, str] = field(default_factory=dict)

    @classmethod
    def of(
        cls,
        mz: ArrayLike,
        intensity: ArrayLike,
        mass_accuracy: MassAccuracy = MassAccuracy.UNIT,
        measurement: Measurement | None = None,
    ) -> Spectrum:
        """Make a spectrum from any two lists of numbers; errors as the constructor."""
        return cls(_frozen(mz, "m/z"), _frozen(intensity, "intensity"), mass_accuracy, measurement or Measurement())

    def __post_init__(self) -> None:
        mz, intensity = _frozen(self.mz, "m/z"), _frozen(self.intensity, "intensity")
        _check_peaks(mz, intensity)
        object.__setattr__(self, "mz", mz)
        object.__setattr__(self, "intensity", intensity)
        object.__setattr__(self, "mass_accuracy", MassAccuracy(self.mass_accuracy))
        object.__setattr__(self, "raw_fields", MappingProxyType(dict(self.raw_fields)))

    def __eq__(self, other: object) -> bool:
        if not isinstance(other, Spectrum):
            return NotImplemented
        return (
            self.content_hash == other.content_hash
            and self.mass_accuracy == other.mass_accuracy
            and self.measurement == other.measurement
            and dict(self.raw_fields) == dict(other.raw_fields)
        )

    def __hash__(self) -> int:
        return hash((self.content_hash, self.mass_accuracy))

    def __len__(self) -> int:
        return len(self.mz)

    @cached_property
    def content_hash(self) -> str:
        """SHA-256 (hex) over the little-endian float64 bytes of m/z, then intensity."""
        digest = hashlib.sha256(self.mz.astype("<f8").tobytes())
        digest.update(self.intensity.astype("<f8").tobytes())
        return digest.hexdigest()

    @cached_property
    def relative_intensity(self) -> NDArray[np.float64]:
        """Intensity relative to the base peak = 100."""
        # Divided first: 100 times a very large intensity would leave float64.
        relative: NDArray[np.float64] = self.intensity / self.intensity.max() * 100.0
        relative.setflags(write=False)
        return relative

    @property
    def base_peak(self) -> tuple[float, float]:
        """(m/z, intensity) of the tallest peak; the lower m/z of equals."""
        position = int(np.argmax(self.intensity))
        return float(self.mz[position]), float(self.intensity[position])

    @property
    def total_ion_current(self) -> float:
        """Sum of all intensities."""
        return float(self.intensity.sum())


def _check_peaks(mz: NDArray[np.float64], intensity: NDArray[np.float64]) -> None:
    if len(mz) != len(intensity):
        raise InvalidSpectrumError(f"{len(mz)} m/z but {len(intensity)} intensities")
    if len(mz) == 0:
        raise InvalidSpectrumError("the spectrum has no peaks")
    if len(mz) > MAX_PEAKS:
        raise InvalidSpectrumError(f"{len(mz)} peaks are more than the {MAX_PEAKS} that a spectrum may have")
    for name, values in (("m/z", mz), ("intensity", intensity)):
        bad = np.flatnonzero(~np.isfinite(values) | (values < 0))
        if len(bad):
            raise InvalidSpectrumError(f"{name} of peak {int(bad[0]) + 1} is {float(values[bad[0]])!r}")
    if mz[0] <= 0 or mz[-1] > MAX_MZ:
        raise InvalidSpectrumError(f"m/z must lie above 0 and at most at {MAX_MZ:g}")
    if intensity.max() > MAX_INTENSITY:
        raise InvalidSpectrumError(f"an intensity of {intensity.max():g} is above {MAX_INTENSITY:g}")
    steps = np.diff(mz)
    if np.any(steps <= 0):
        position = int(np.flatnonzero(steps <= 0)[0])
        what = "stands twice" if steps[position] == 0 else "is not in rising order"
        raise InvalidSpectrumError(f"m/z {mz[position + 1]:g} (peak {position + 2}) {what}")
    if not np.any(intensity > 0):
        raise InvalidSpectrumError("no peak has an intensity above 0")


@dataclass(frozen=True)
class ClaimedAssignment:
    """What a file claims of one peak: its m/z, its intensity where given, and the assignment as written."""

    mz: float
    intensity: float | None
    text: str


@dataclass(frozen=True)
class SourceSpectrum:
    """A spectrum as a reader found it: where it stood, what the file calls it, and what the reader noticed.

    `title`, `names`, `formula`, `cas`, `smiles`, `inchikey` and `assignments` are verbatim claims of the file. `index`
    counts from 1. `notes` are remarks of the reader (an assumed encoding, a corrected count) that become findings at
    intake.
    """

    file_name: str
    index: int
    spectrum: Spectrum
    title: str | None = None
    formula: str | None = None
    cas: str | None = None
    smiles: str | None = None
    inchikey: str | None = None
    notes: tuple[str, ...] = ()
    names: tuple[str, ...] = ()
    assignments: tuple[ClaimedAssignment, ...] = ()


@dataclass(frozen=True)
class SourceFile:
    """A file that was read: its name, SHA-256 (hex), the reader's name and its spectra in order."""

    file_name: str
    sha256: str
    reader: str
    spectra: tuple[SourceSpectrum, ...]
