"""The door: content decides, and whatever is no spectrum file is refused with file, place, reason and advice."""

from __future__ import annotations

import hashlib
import os
from pathlib import Path
from typing import Any

import pytest

from speclib.errors import InputFileError, InvalidValueError
from speclib.formats import reading
from speclib.formats.reading import ReadOptions, read_spectra, read_spectra_from_bytes
from speclib.model.spectrum import MassAccuracy

JCAMP = b"##TITLE= a\n##JCAMP-DX= 5\n##DATA TYPE= MASS SPECTRUM\n##NPOINTS= 1\n##PEAK TABLE= (XY..XY)\n43 5\n##END=\n"


def refusal(data: bytes, options: ReadOptions | None = None) -> InputFileError:
    with pytest.raises(InputFileError) as caught:
        read_spectra_from_bytes("sample.dat", data, options or ReadOptions())
    error = caught.value
    assert str(error).startswith("sample.dat")
    assert error.advice
    assert "\n" not in str(error)
    return error


@pytest.mark.parametrize("name", ["a.jdx", "a.csv", "a.xml", "a"])
def test_content_not_extension_decides(name: str, tmp_path: Path) -> None:
    (tmp_path / name).write_bytes(JCAMP)
    assert read_spectra(tmp_path / name).reader == "JCAMP-DX"
    (tmp_path / name).write_bytes(b"43\t5\n")
    assert read_spectra(tmp_path / name).reader == "delimited text"


def test_a_jcamp_file_under_comments_and_empty_lines_is_known() -> None:
    assert read_spectra_from_bytes("x", b"\n$$ hello\n\n  " + JCAMP).reader == "JCAMP-DX"


def test_the_source_keeps_base_name_and_hash_of_the_bytes(tmp_path: Path) -> None:
    path = tmp_path / "vial 3.txt"
    path.write_bytes(b"43\t5\r\n")
    source = read_spectra(path)
    assert source.file_name == "vial 3.txt" == source.spectra[0].file_name
    assert source.sha256 == hashlib.sha256(b"43\t5\r\n").hexdigest()
    assert source.spectra[0].index == 1


def test_a_missing_file_is_named_with_its_folder(tmp_path: Path) -> None:
    with pytest.raises(InputFileError, match=r"gone\.txt: the file does not exist; check name and folder"):
        read_spectra(tmp_path / "gone.txt")


def test_a_folder_is_refused(tmp_path: Path) -> None:
    (tmp_path / "run.d").mkdir()
    with pytest.raises(InputFileError, match=r"run\.d: this is a folder, not a file; name the file in it"):
        read_spectra(tmp_path / "run.d")


def test_a_name_with_a_null_is_refused_not_a_crash(tmp_path: Path) -> None:
    with pytest.raises(InputFileError, match="cannot be opened"):
        read_spectra(tmp_path / "a\0b")


@pytest.mark.skipif(not hasattr(os, "mkfifo"), reason="no named pipes on this system")
def test_a_pipe_is_refused_without_waiting(tmp_path: Path) -> None:
    os.mkfifo(tmp_path / "pipe")
    with pytest.raises(InputFileError, match="pipe: this is not a regular file"):
        read_spectra(tmp_path / "pipe")


@pytest.mark.parametrize(
    ("error", "words"),
    [(PermissionError(13, "no"), "permission denied"), (OSError(5, "Input/output error"), "Input/output error")],
)
def test_a_file_that_cannot_be_opened_says_why(
    error: OSError, words: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    path = tmp_path / "locked.txt"
    path.write_bytes(b"43 5")

    def refuse(*_: Any, **__: Any) -> None:
        raise error

    monkeypatch.setattr(Path, "open", refuse)
    with pytest.raises(InputFileError, match=rf"locked\.txt: .*{words}"):
        read_spectra(path)


def test_a_file_above_the_bound_is_refused_by_its_size(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(reading, "MAX_FILE_BYTES", 2**20)
    (tmp_path / "big.txt").write_bytes(b"4" * (2**20 + 1))
    with pytest.raises(InputFileError, match=r"big\.txt: the file is larger than 1 MiB; give files of single spectra"):
        read_spectra(tmp_path / "big.txt")


@pytest.mark.parametrize("data", [b"", b"\n \r\n", b"\xef\xbb\xbf", b"\xff\xfe", b"\0\0\0"])
def test_an_empty_file_is_called_empty(data: bytes) -> None:
    assert refusal(data).reason == "the file is empty"


@pytest.mark.parametrize(
    ("data", "words"),
    [
        (b"CDF\x01" + bytes(50), "netCDF"),
        (b"CDF\x02" + bytes(50), "netCDF"),
        (b"\x89HDF\r\n\x1a\n" + bytes(50), "HDF5"),
        (b"PK\x03\x04" + bytes(50), "zip archive"),
        (b"\x1f\x8b\x08" + bytes(50), "gzip"),
        (b"%PDF-1.7\n", "PDF"),
        (b"SQLite format 3\0" + bytes(50), "SQLite"),
        (b"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1" + bytes(50), "workbook"),
        (b"\x89PNG\r\n\x1a\n" + bytes(50), "PNG"),
        (b'<?xml version="1.0"?>\n<mzML xmlns="x">', "mzML run"),
        (b"\xef\xbb\xbf<indexedmzML>", "mzML run"),
        ('<?xml version="1.0"?><x/>'.encode("utf-16"), "XML document"),
        (b"<!DOCTYPE html><html>", "HTML page"),
        (b'<!DOCTYPE a [<!ENTITY b "c">]><a>&b;</a>', "XML document"),
        (b"<mzSpecLib>\nMS:1003186|library format version=1.0", "mzSpecLib"),
        (b'{"peaks": [[43, 5]]}', "JSON"),
        (b"{\\rtf1\\ansi 43 5}", "RTF"),
    ],
)
def test_known_but_unread_content_is_called_by_its_name(data: bytes, words: str) -> None:
    error = refusal(data)
    assert words in error.reason
    assert error.place in ("first bytes", "beginning")


@pytest.mark.parametrize("data", [b"43 5\n\0\n44 6", bytes(range(1, 256)) * 4, b"43\x075\n", b"43 5\x1b[31m\n"])
def test_binary_junk_is_refused_with_its_place(data: bytes) -> None:
    error = refusal(data)
    assert error.place.startswith(("offset", "line"))
    assert "binary data" in error.reason or "neither UTF-8" in error.reason


def test_utf16_without_a_mark_is_asked_about_and_read_when_named() -> None:
    data = "# name: caf\u00e9\n43\t5\n".encode("utf-16-le")
    assert "--encoding utf-16-le" in refusal(data).advice
    source = read_spectra_from_bytes("x", data, ReadOptions(encoding="utf-16-le"))
    assert source.spectra[0].title == "caf\u00e9"
    assert "--encoding utf-16-be" in refusal("43\t5\n44\t6".encode("utf-16-be")).advice


def test_windows_1252_is_read_with_a_note_that_names_the_line() -> None:
    source = read_spectra_from_bytes("x", b"# note: ok\n# name: na\xefve\n43\t5\n")
    assert source.spectra[0].title == "na\u00efve"
    assert source.spectra[0].notes == (
        "the text is not UTF-8 (line 2) and was read as Windows-1252; --encoding NAME reads it otherwise",
    )


def test_bytes_of_neither_encoding_are_refused_with_their_line() -> None:
    error = refusal(b"43\t5\n# \x81\n")
    assert error.place == "line 2"
    assert "--encoding NAME" in error.advice


def test_a_named_encoding_is_strict() -> None:
    error = refusal(b"# name: caf\xe9\n43 5", ReadOptions(encoding="utf-8"))
    assert "not utf-8" in error.reason
    assert error.place == "line 1"


def test_a_named_encoding_against_the_byte_order_mark_is_refused() -> None:
    error = refusal(b"\xef\xbb\xbf43 5", ReadOptions(encoding="cp1252"))
    assert "byte order mark" in error.reason
    assert read_spectra_from_bytes("x", b"\xef\xbb\xbf43 5", ReadOptions(encoding="utf8")).spectra


def test_a_final_control_z_of_old_programs_is_ignored() -> None:
    assert len(read_spectra_from_bytes("x", b"43 5\r\n\x1a\0\0").spectra[0].spectrum) == 1


def test_a_hostile_file_name_stays_on_one_line_of_the_message(tmp_path: Path) -> None:
    with pytest.raises(InputFileError) as caught:
        read_spectra(tmp_path / "a\nb\x1b.txt")
    assert str(caught.value).isprintable()


@pytest.mark.parametrize(
    ("values", "words"),
    [
        ({"encoding": "no-such"}, "no-such"),
        ({"encoding": "zlib"}, "not an encoding of plain text"),
        ({"encoding": "punycode"}, "not an encoding of plain text"),
        ({"encoding": "a b\0"}, "not the name of an encoding"),
        ({"decimal": "dot"}, "--decimal"),
        ({"separator": "|"}, "--separator"),
        ({"mass_accuracy": "high"}, "--mass-accuracy"),
        ({"mz_from": float("nan")}, "mz_from"),
        ({"mz_to": -1.0}, "mz_to"),
        ({"mz_from": 400.0, "mz_to": 40.0}, "empty"),
    ],
)
def test_an_option_that_cannot_be_is_refused_at_once(values: dict[str, Any], words: str) -> None:
    with pytest.raises(InvalidValueError, match=words):
        ReadOptions(**values)


def test_the_scanned_range_of_the_options_wins_over_the_file() -> None:
    source = read_spectra_from_bytes("x", b"# mz_from: 50\n43 5\n", ReadOptions(mz_from=35, mz_to=400))
    measured = source.spectra[0].spectrum.measurement
    assert (measured.mz_from, measured.mz_to) == (35, 400)


def test_a_range_that_only_together_is_empty_is_refused_with_the_file() -> None:
    assert "is empty" in refusal(b"# mz_from: 50\n43 5\n", ReadOptions(mz_to=45.0)).reason


def test_a_peak_outside_the_stated_range_is_remarked() -> None:
    notes = read_spectra_from_bytes("x", b"# scan range: 50 - 500\n43 5\n49.6 3\n44 0\n").spectra[0].notes
    assert "the peak at m/z 43 lies outside the stated scanned range" in notes


def test_nothing_is_invented_for_a_bare_table() -> None:
    spectrum = read_spectra_from_bytes("x", b"43 5\n").spectra[0]
    assert spectrum.spectrum.measurement.known() == {}
    assert dict(spectrum.spectrum.raw_fields) == {}
    assert (spectrum.title, spectrum.formula, spectrum.cas, spectrum.smiles, spectrum.inchikey) == (None,) * 5
    assert spectrum.spectrum.mass_accuracy is MassAccuracy.UNIT
