"""Check on a file of the protocol's authors, which may be read in place but not copied into this project.

SPECLIB_OUTSIDE_DATA names a folder that holds the unpacked source distribution of the package `jcamp` 1.3.2. Facts
about the file: 26 peaks, base peak m/z 128 at 100.00, one CRLF text with comments.
"""

from __future__ import annotations

import os
from pathlib import Path

import pytest

from speclib.formats.reading import read_spectra
from speclib.model.spectrum import MassAccuracy, SourceSpectrum

VARIABLE = "SPECLIB_OUTSIDE_DATA"
FILE = "ISAS_MS1.DX"


@pytest.fixture(scope="module")
def outside_file() -> Path:
    folder = os.environ.get(VARIABLE)
    required = bool(os.environ.get("CI") or os.environ.get("SPECLIB_REQUIRE_OUTSIDE_DATA"))
    advice = f"set {VARIABLE} to a folder with the unpacked source distribution of jcamp 1.3.2, which holds {FILE}"
    if not folder:
        if required:
            pytest.fail(f"{VARIABLE} is not set, and this run requires outside data: {advice}")
        pytest.skip(f"{VARIABLE} is not set: {advice}")
    found = sorted(Path(folder).rglob(FILE))
    if not found:
        pytest.fail(f"{VARIABLE} is set, but {FILE} is nowhere in that folder: {advice}")
    return found[0]


@pytest.fixture(scope="module")
def outside_spectrum(outside_file: Path) -> SourceSpectrum:
    source = read_spectra(outside_file)
    assert source.reader == "JCAMP-DX"
    assert len(source.spectra) == 1
    return source.spectra[0]


def test_the_authors_file_has_its_26_peaks_and_base_peak(outside_spectrum: SourceSpectrum) -> None:
    assert len(outside_spectrum.spectrum) == 26
    assert outside_spectrum.spectrum.base_peak == (128.0, 100.0)
    assert outside_spectrum.spectrum.mass_accuracy is MassAccuracy.UNIT
    assert outside_spectrum.notes == ()


def test_the_authors_labels_are_understood_without_their_comments(outside_spectrum: SourceSpectrum) -> None:
    measured = outside_spectrum.spectrum.measurement
    assert (measured.ionisation, measured.analyser, measured.inlet) == ("EI", "TRAP", "GC")
    assert measured.electron_energy_ev is None
    assert outside_spectrum.spectrum.raw_fields["$$ line 9"] == "ion trap spectrometer"


def test_an_independent_reader_finds_the_same_peaks(outside_file: Path, outside_spectrum: SourceSpectrum) -> None:
    jcamp = pytest.importorskip("jcamp")
    theirs = jcamp.readfile(str(outside_file))
    assert theirs["x"].tolist() == outside_spectrum.spectrum.mz.tolist()
    assert theirs["y"].tolist() == outside_spectrum.spectrum.intensity.tolist()
    assert theirs["title"] == outside_spectrum.title
    assert theirs["npoints"] == len(outside_spectrum.spectrum)
