"""Checks on files from outside the project, which may be read in place but not copied into it.

SPECLIB_OUTSIDE_DATA names a folder that holds the unpacked source distribution of the package `jcamp` 1.3.2. The facts
about its mass spectra were found with a separate, throw-away parser; every NPOINTS agreed with it.
"""

from __future__ import annotations

import os
from pathlib import Path

import numpy as np
import pytest

from speclib.errors import InputFileError
from speclib.formats.jcamp_asdf import decode_equally_spaced
from speclib.formats.jcamp_records import read_blocks
from speclib.formats.jcamp_tables import find_table, split_table
from speclib.formats.reading import read_spectra
from speclib.formats.text_document import decode_document
from speclib.model.spectrum import MassAccuracy, SourceSpectrum

VARIABLE = "SPECLIB_OUTSIDE_DATA"
NO_ENERGY = "electron energy of"


@pytest.fixture(scope="module")
def outside_folder() -> Path:
    folder = os.environ.get(VARIABLE)
    required = bool(os.environ.get("CI") or os.environ.get("SPECLIB_REQUIRE_OUTSIDE_DATA"))
    advice = f"set {VARIABLE} to a folder with the unpacked source distribution of jcamp 1.3.2"
    if not folder:
        if required:
            pytest.fail(f"{VARIABLE} is not set, and this run requires outside data: {advice}")
        pytest.skip(f"{VARIABLE} is not set: {advice}")
    return Path(folder)


def outside_file(folder: Path, name: str) -> Path:
    found = sorted(folder.rglob(name))
    if not found:
        pytest.fail(f"{VARIABLE} is set, but {name} is nowhere in that folder")
    return found[0]


def read(folder: Path, name: str) -> tuple[SourceSpectrum, ...]:
    source = read_spectra(outside_file(folder, name))
    assert source.reader == "JCAMP-DX"
    return source.spectra


# Peaks as the table holds them, the point 0, 0 for plotting included where there is one; base peaks.
CHECKED = {
    "ISAS_MS1.DX": ([26], [(128, 100.0)]),
    "ISAS_MS3.DX": ([18, 26, 26], [(94, 100.0), (128, 100.0), (108, 100.0)]),
    "1-propanol_ms.jdx": (
        [44, 17, 61, 57, 61, 61],
        [(31, 3017490), (31, 349554), (31, 69106700), (31, 2301740), (42, 1122290), (42, 1191910)],
    ),
    "ethanol_ms.jdx": ([12], [(31, 999)]),
    "118-96-7-Mass.jdx": ([116], [(210, 9999)]),
    "Tetrachloroethylene_ms.jdx": ([45], [(166, 9999)]),
}


@pytest.mark.parametrize("name", CHECKED)
def test_every_spectrum_has_its_peaks_and_base_peak(outside_folder: Path, name: str) -> None:
    spectra = read(outside_folder, name)
    counts, base_peaks = CHECKED[name]
    assert [len(source.spectrum) for source in spectra] == counts
    assert [source.spectrum.base_peak for source in spectra] == base_peaks
    assert all(source.spectrum.mass_accuracy is MassAccuracy.UNIT for source in spectra)
    assert [source.index for source in spectra] == list(range(1, len(spectra) + 1))


def test_the_authors_labels_are_understood_without_their_comments(outside_folder: Path) -> None:
    (source,) = read(outside_folder, "ISAS_MS1.DX")
    measured = source.spectrum.measurement
    assert (measured.ionisation, measured.analyser, measured.inlet) == ("EI", "TRAP", "GC")
    assert measured.electron_energy_ev is None
    assert source.spectrum.raw_fields["$$ line 9"] == "ion trap spectrometer"
    assert source.notes == ()


def test_a_page_of_the_series_is_the_single_spectrum(outside_folder: Path) -> None:
    (single,) = read(outside_folder, "ISAS_MS1.DX")
    pages = read(outside_folder, "ISAS_MS3.DX")
    assert pages[1].spectrum.content_hash == single.spectrum.content_hash
    assert [page.spectrum.measurement.retention_time_s for page in pages] == [272.0, 301.0, 333.0]
    assert all(page.spectrum.measurement.ionisation == "EI" for page in pages)
    assert all(page.notes == () for page in pages)


def test_the_raw_scan_is_decoded_and_refused_as_one(outside_folder: Path) -> None:
    path = outside_file(outside_folder, "ISAS_MS2.DX")
    document = decode_document(path.name, path.read_bytes())
    (block,) = read_blocks(document)
    points = decode_equally_spaced(document, block, split_table(document, find_table(document, block)).body)
    assert len(points.x) == len(points.y) == 346
    top = int(np.argmax(points.y))
    assert points.x[top] == pytest.approx(12.5576, abs=5e-5)
    assert points.y[top] == pytest.approx(688069973.29, abs=5e-3)
    assert (points.x[0], points.x[-1]) == pytest.approx((13.998, 6.999))
    with pytest.raises(InputFileError, match=r"raw scan.*'SECONDS' and not m/z: 346 points.*at 12\.5576"):
        read_spectra(path)


def test_the_linked_series_inherits_and_takes_no_energy_from_words(outside_folder: Path) -> None:
    spectra = read(outside_folder, "1-propanol_ms.jdx")
    for source in spectra:
        assert (source.cas, source.formula, source.names) == ("71-23-8", "C 3 H 8 O 1", ("1-propanol",))
        assert source.spectrum.measurement.ionisation == "EI"
        assert source.spectrum.measurement.electron_energy_ev is None
        assert source.assignments == ()
        (note,) = source.notes
        assert "stands only in the text" in note
    assert [NO_ENERGY + " 70 eV" in source.notes[0] for source in spectra] == [True, *[False] * 5]
    assert all(source.spectrum.mz[0] == 10 and source.spectrum.intensity[0] == 0 for source in spectra)


def test_the_same_series_with_labelled_energies_is_kept_apart(outside_folder: Path) -> None:
    spectra = read(outside_folder, "blckpkt1.jdx")
    energies = [source.spectrum.measurement.electron_energy_ev for source in spectra]
    assert energies[:2] == [70.0, 20.0]
    assert [any("must not be mixed" in note for note in source.notes) for source in spectra] == [
        energy is not None and energy < 30 for energy in energies
    ]


def test_many_blocks_of_chemical_ionisation_are_not_called_ei(outside_folder: Path) -> None:
    spectra = read(outside_folder, "CH4_CI.jdx")
    counts = [len(source.spectrum) for source in spectra]
    assert len(counts) == 145
    assert sum(counts) == 7235
    assert {position + 1: count for position, count in enumerate(counts) if count != 50} == {41: 44, 81: 41}
    bases = [source.spectrum.base_peak for source in spectra]
    assert {intensity for _, intensity in bases} == {1000.0}
    assert (bases[0][0], bases[-1][0]) == (243.0, 397.0)
    assert all(source.cas is None and source.formula is None for source in spectra)
    assert spectra[0].names == ("ribitol",)
    assert spectra[0].spectrum.measurement.retention_index == 1723.0
    for source in spectra:
        assert source.spectrum.measurement.ionisation is None
        assert source.notes[0].startswith("the ionisation is not stated")


@pytest.mark.parametrize(
    ("name", "peaks"), [("pktab1.jdx", 45), ("pktab2.jdx", 22), ("mactab1.jdx", 22), ("blckpkt1.jdx", 44)]
)
def test_further_mass_spectra_are_read(outside_folder: Path, name: str, peaks: int) -> None:
    assert len(read(outside_folder, name)[0].spectrum) == peaks


def test_every_other_file_is_refused_with_a_sentence(outside_folder: Path) -> None:
    read_names = {*CHECKED, "CH4_CI.jdx", "pktab1.jdx", "pktab2.jdx", "mactab1.jdx", "blckpkt1.jdx"}
    paths = [path for path in outside_folder.rglob("*") if path.suffix.lower() in (".dx", ".jdx", ".jcm")]
    assert len(paths) > 100
    for path in paths:
        if path.name in read_names:
            continue
        with pytest.raises(InputFileError) as caught:
            read_spectra(path)
        assert caught.value.advice, path.name
        assert str(caught.value).isprintable(), path.name


def test_structures_and_assignments_of_another_kind_are_refused_as_such(outside_folder: Path) -> None:
    with pytest.raises(InputFileError, match="chemical structure and no spectrum"):
        read_spectra(outside_file(outside_folder, "ISAS_CDX.DX"))


@pytest.mark.parametrize("name", ["ISAS_MS1.DX", "ethanol_ms.jdx", "118-96-7-Mass.jdx", "Tetrachloroethylene_ms.jdx"])
def test_an_independent_reader_finds_the_same_peaks(outside_folder: Path, name: str) -> None:
    jcamp = pytest.importorskip("jcamp")
    (ours,) = read(outside_folder, name)
    theirs = jcamp.readfile(str(outside_file(outside_folder, name)))
    assert theirs["x"].tolist() == ours.spectrum.mz.tolist()
    assert theirs["y"].tolist() == ours.spectrum.intensity.tolist()
    assert theirs["npoints"] == len(ours.spectrum)


def test_an_independent_reader_finds_the_same_linked_peaks(outside_folder: Path) -> None:
    jcamp = pytest.importorskip("jcamp")
    theirs = jcamp.readfile(str(outside_file(outside_folder, "1-propanol_ms.jdx")))["children"]
    ours = read(outside_folder, "1-propanol_ms.jdx")
    assert [child["x"].tolist() for child in theirs] == [source.spectrum.mz.tolist() for source in ours]
    assert [child["y"].tolist() for child in theirs] == [source.spectrum.intensity.tolist() for source in ours]


def decoded(folder: Path, name: str) -> list[float]:
    path = outside_file(folder, name)
    document = decode_document(path.name, path.read_bytes())
    (block,) = read_blocks(document)
    points = decode_equally_spaced(document, block, split_table(document, find_table(document, block)).body)
    return [float(y) for y in points.y]


@pytest.mark.parametrize("name", ["BRUKPAC.DX", "BRUKSQZ.DX", "TEST32.DX"])
def test_forms_of_one_table_decode_alike(outside_folder: Path, name: str) -> None:
    """The authors' test disk holds one NMR spectrum in several forms; only the decoding is of interest here."""
    assert len(decoded(outside_folder, name)) == 16384
    assert decoded(outside_folder, name) == decoded(outside_folder, "BRUKAFFN.DX")


@pytest.mark.parametrize("name", ["brukdif.jdx", "pacdec1.jdx", "dupdec2.jdx"])
def test_an_independent_reader_decodes_the_same_ordinates(outside_folder: Path, name: str) -> None:
    jcamp = pytest.importorskip("jcamp")
    theirs = jcamp.readfile(str(outside_file(outside_folder, name)))["y"]
    assert decoded(outside_folder, name) == pytest.approx(theirs.tolist(), rel=1e-12)
