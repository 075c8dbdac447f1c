"""Invented files with everything that should be read from them written beside them."""

from __future__ import annotations

import hashlib
import json
from pathlib import Path
from typing import Any

import pytest

from speclib.formats.reading import read_spectra
from speclib.model.spectrum import SourceSpectrum

GOLDEN = Path(__file__).parent.parent / "golden" / "formats"
FILES = sorted(path.name for path in GOLDEN.iterdir() if path.suffix != ".json")


def as_expected(source: SourceSpectrum) -> dict[str, Any]:
    spectrum = source.spectrum
    return {
        "index": source.index,
        "title": source.title,
        "formula": source.formula,
        "cas": source.cas,
        "mz": spectrum.mz.tolist(),
        "intensity": spectrum.intensity.tolist(),
        "mass_accuracy": spectrum.mass_accuracy.value,
        "measurement": spectrum.measurement.known(),
        "raw_fields": dict(spectrum.raw_fields),
        "notes": len(source.notes),
    }


@pytest.mark.parametrize("name", FILES)
def test_golden_file_is_read_exactly_as_written_beside_it(name: str) -> None:
    expected = json.loads((GOLDEN / name).with_suffix(".json").read_text(encoding="utf-8"))
    source = read_spectra(GOLDEN / name)
    assert source.reader == expected["reader"]
    assert [as_expected(spectrum) for spectrum in source.spectra] == expected["spectra"]
    assert source.file_name == name
    assert source.sha256 == hashlib.sha256((GOLDEN / name).read_bytes()).hexdigest()


def test_there_are_golden_files_of_both_formats() -> None:
    assert {Path(name).suffix for name in FILES} >= {".csv", ".txt", ".jdx"}


@pytest.mark.parametrize("name", FILES)
@pytest.mark.parametrize("line_end", ["\r\n", "\r"], ids=["crlf", "cr"])
def test_other_line_ends_change_nothing_but_the_hash(name: str, line_end: str, tmp_path: Path) -> None:
    text = (GOLDEN / name).read_text(encoding="utf-8")
    other = tmp_path / name
    other.write_bytes(text.replace("\n", line_end).encode())
    ours, theirs = read_spectra(GOLDEN / name), read_spectra(other)
    assert ours.sha256 != theirs.sha256
    assert ours.spectra == theirs.spectra


@pytest.mark.parametrize("name", FILES)
@pytest.mark.parametrize("encoding", ["utf-8-sig", "utf-16", "utf-16-be-with-mark", "utf-32"])
def test_byte_order_marks_are_honoured_and_leave_no_trace(name: str, encoding: str, tmp_path: Path) -> None:
    text = (GOLDEN / name).read_text(encoding="utf-8")
    data = ("\ufeff" + text).encode("utf-16-be") if encoding == "utf-16-be-with-mark" else text.encode(encoding)
    (tmp_path / name).write_bytes(data)
    assert read_spectra(tmp_path / name).spectra == read_spectra(GOLDEN / name).spectra
