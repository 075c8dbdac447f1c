"""Reading a source: a file of spectra, or one spectrum taken from a chromatographic run."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Any

from speclib.errors import InputFileError, InvalidValueError
from speclib.formats.reading import ReadOptions, read_spectra
from speclib.model.spectrum import SourceFile
from speclib.units import minutes_from_seconds, seconds_from_minutes

NETCDF_MAGICS = (b"CDF\x01", b"CDF\x02")
RUN_READER = "ANDI-MS netCDF"
MOST_PEAKS_LISTED = 20


@dataclass(frozen=True)
class RunSelection:
    """Which scans make the spectrum: around `at_s`, `width_s` wide, minus the mean of `background_s` (seconds)."""

    at_s: float
    width_s: float = 0.0
    background_s: tuple[float, float] | None = None


def run_selection(at_min: float | None, width_min: float | None, background: str | None) -> RunSelection | None:
    """Read the options `--at`, `--width` and `--background T1..T2`, all in minutes; None when none is given.

    Raises:
        InvalidValueError: unreadable or empty window, or a width or background without a time.
    """
    if at_min is None:
        if width_min is not None or background is not None:
            raise InvalidValueError("--width and --background need a time", "give --at MINUTES")
        return None
    window = None
    if background is not None:
        first, dots, last = background.partition("..")
        try:
            window = (seconds_from_minutes(float(first)), seconds_from_minutes(float(last)))
        except ValueError:
            window = None
        if window is None or not dots or not 0 <= window[0] < window[1] < float("inf"):
            raise InvalidValueError(f"{background!r} is not a window in minutes", "write it like 4.10..4.25")
    return RunSelection(seconds_from_minutes(at_min), seconds_from_minutes(width_min or 0.0), window)


def is_run(path: Path) -> bool:
    """Whether a file begins as a classic netCDF file does; a file that cannot be opened is left to the readers."""
    try:
        with path.open("rb") as handle:
            return handle.read(4) in NETCDF_MAGICS
    except OSError:
        return False


def read_source(path: Path, reading: ReadOptions, selection: RunSelection | None = None) -> SourceFile:
    """The spectra of a file, or the one that `selection` takes from a run.

    Raises:
        InputFileError: the file cannot be read, or is a run and no time is given. InvalidValueError: a time for a file
            that is no run, or outside the run.
    """
    if not is_run(path):
        if selection is not None:
            raise InvalidValueError(
                f"{path.name} is no chromatographic run", "leave --at, --width and --background out"
            )
        return read_spectra(path, reading)
    from speclib.formats.andi import averaged_spectrum, read_andi_run

    run = read_andi_run(path)
    if selection is None:
        first, last = (minutes_from_seconds(t) for t in run.limits_s)
        raise InputFileError(
            path.name,
            f"is a run from {first:.2f} to {last:.2f} min",
            advice="choose a time with --at MINUTES (speclib run show lists the peaks)",
        )
    spectrum = averaged_spectrum(
        run, selection.at_s, selection.width_s, selection.background_s, mass_accuracy=reading.mass_accuracy
    )
    return SourceFile(run.file_name, run.sha256, RUN_READER, (spectrum,))


@dataclass(frozen=True)
class RunOverview:
    """What a run holds: scans as (number, time in s, total ion current, points), and positions of its tallest peaks."""

    file: str
    scans: tuple[tuple[int, float, float, int], ...]
    peaks: tuple[int, ...]
    mz_from: float | None
    mz_to: float | None
    is_selected_ion: bool
    ionisation: str | None

    def to_json(self) -> dict[str, Any]:
        """The overview as plain values; times in minutes."""
        return {
            "schema": 1,
            "file": self.file,
            "mz_from": self.mz_from,
            "mz_to": self.mz_to,
            "is_selected_ion": self.is_selected_ion,
            "ionisation": self.ionisation,
            "peaks": [self.scans[i][0] for i in self.peaks],
            "scans": [
                {"scan": n, "time_min": round(minutes_from_seconds(t), 5), "total_ion_current": tic, "points": points}
                for n, t, tic, points in self.scans
            ],
        }


def show_run(path: Path) -> RunOverview:
    """List the scans and the total ion current of a run, and the tallest local maxima of the current.

    Raises:
        InputFileError: no run, or damaged.
    """
    if not is_run(path):
        if not path.is_file():
            read_spectra(path)
        raise InputFileError(path.name, "is no ANDI-MS run", advice="give the netCDF file (.cdf) of a run")
    from speclib.formats.andi import read_andi_run

    run = read_andi_run(path)
    current = run.total_ion_current
    maxima = [
        i
        for i in range(len(current))
        if current[i] > 0
        and (i == 0 or current[i] > current[i - 1])
        and (i == len(current) - 1 or current[i] >= current[i + 1])
    ]
    tallest = sorted(sorted(maxima, key=lambda i: -current[i])[:MOST_PEAKS_LISTED])
    scans = tuple(
        (i + 1, float(run.scan_time_s[i]), float(current[i]), int(run.point_count[i])) for i in range(len(current))
    )
    return RunOverview(
        run.file_name, scans, tuple(tallest), run.mz_from, run.mz_to, run.is_selected_ion, run.ionisation
    )
