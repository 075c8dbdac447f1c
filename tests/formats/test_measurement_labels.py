"""The `# key: value` lines of delimited text."""

from __future__ import annotations

from dataclasses import fields
from typing import Any

import pytest

from speclib.errors import InputFileError
from speclib.formats.measurement_labels import known_key
from speclib.formats.reading import ReadOptions, read_spectra_from_bytes
from speclib.model.spectrum import Measurement, SourceSpectrum


def read(labels: str, table: str = "43\t5.5", **options: Any) -> SourceSpectrum:
    data = f"{labels}\n{table}\n".encode()
    return read_spectra_from_bytes("peaks.txt", data, ReadOptions(**options)).spectra[0]


@pytest.mark.parametrize("name", [field.name for field in fields(Measurement)])
def test_every_field_of_a_measurement_is_a_known_key(name: str) -> None:
    assert known_key(name) is not None


@pytest.mark.parametrize(
    ("label", "field", "value"),
    [
        ("retention_time_s: 318", "retention_time_s", 318.0),
        ("retention_time_s: 318 s", "retention_time_s", 318.0),
        ("retention_time_min: 5.3", "retention_time_s", 318.0),
        ("Retention time (min): 7.37", "retention_time_s", 442.2),
        ("RT: 5.3 min", "retention_time_s", 318.0),
        ("rt = 318 sec", "retention_time_s", 318.0),
        ("rt_min: 5,3", "retention_time_s", 318.0),
        ("RI: 1103.5", "retention_index", 1103.5),
        ("ionization mode: EI+", "ionisation", "EI"),
        ("ionisation: electron ionization", "ionisation", "EI"),
        ("ionisation: CI", "ionisation", "CI"),
        ("ionization energy: 70 eV", "electron_energy_ev", 70.0),
        ("electron_energy_ev: 70", "electron_energy_ev", 70.0),
        ("source temperature: 230 \u00b0C", "source_temperature_c", 230.0),
        ("scan rate: 5.2 Hz", "scan_rate_hz", 5.2),
        ("amount on column: 500 pg", "amount_on_column_ng", 0.5),
        ("scans averaged: 7", "scans_averaged", 7),
        ("m/z from: 35", "mz_from", 35.0),
        ("mass range: 35 - 550", "mz_to", 550.0),
        ("phase: 5% Phenyl", "phase", "5% phenyl"),
        ("column: 30 m x 0.25 mm: 0.25 um", "column", "30 m x 0.25 mm: 0.25 um"),
        ("analyzer: quadrupole", "analyser", "quadrupole"),
    ],
)
def test_a_known_label_becomes_a_field(label: str, field: str, value: Any) -> None:
    spectrum = read(f"# {label}").spectrum
    assert spectrum.measurement.known()[field] == value
    assert dict(spectrum.raw_fields) == {}


@pytest.mark.parametrize(
    ("label", "claim", "value"),
    [
        ("name: caffeine", "title", "caffeine"),
        ("Title: 1:2 mixture", "title", "1:2 mixture"),
        ("Formula: C 8 H 10", "formula", "C 8 H 10"),
        ("CAS number: 58-08-2", "cas", "58-08-2"),
        ("SMILES=C/C=C\\C", "smiles", "C/C=C\\C"),
        ("smiles: C[C@H](O)=O", "smiles", "C[C@H](O)=O"),
        ("InChIKey: RYYVLZVUVIJVGH-UHFFFAOYSA-N", "inchikey", "RYYVLZVUVIJVGH-UHFFFAOYSA-N"),
    ],
)
def test_a_claim_is_kept_verbatim(label: str, claim: str, value: str) -> None:
    assert getattr(read(f"# {label}"), claim) == value


@pytest.mark.parametrize(
    ("label", "words"),
    [
        ("retention_time: 5.3", "has no unit"),
        ("rt_s: 5.3 min", "unknown unit 'min'"),
        ("rt_min: five", "is not a number"),
        ("rt_min: -1", "negative"),
        ("rt_min: 1_0", "unknown unit"),
        ("retention_index: 1200 min", "unknown unit 'min'"),
        ("retention_index: nan", "is not a number"),
        ("source_temperature: 230", "has no unit"),
        ("ionisation: ESI", "neither electron ionisation"),
        ("mz_range: 50", "is not a range"),
        ("mz_range: 50-50", "empty range"),
        ("scans averaged: 2.5", "not a whole number"),
        ("phase: DB-5ms", "trade name belongs under column"),
        ("mass_accuracy: high", "neither unit nor accurate"),
        ("threshold: 1.234,5", "both a point and a comma"),
        ("threshold: 1,234", "thousands mark"),
    ],
)
def test_a_known_label_with_an_unreadable_value_names_its_line(label: str, words: str) -> None:
    with pytest.raises(InputFileError) as caught:
        read(f"# vial: 3\n# {label}")
    assert caught.value.place == "line 2"
    assert words in caught.value.reason
    assert str(caught.value).startswith("peaks.txt, line 2: the value ")
    assert "leave it empty" in caught.value.advice


def test_the_decimal_mark_of_the_table_reads_the_labels_too() -> None:
    assert read("# threshold: 1,234", "43,5;5,5").spectrum.measurement.threshold == 1.234
    with pytest.raises(InputFileError, match="decimal point or a thousands mark"):
        read("# threshold: 1.234", "43,5;5,5")
    assert read("# threshold: 1,234", "43;5", decimal="comma").spectrum.measurement.threshold == 1.234


def test_an_empty_label_is_an_unknown_value() -> None:
    source = read("# rt:\n# name:   ")
    assert source.spectrum.measurement.known() == {}
    assert source.title is None


def test_a_known_label_twice_names_both_lines() -> None:
    with pytest.raises(InputFileError, match=r"line 3: 'rt_min' was already given in line 1"):
        read("# rt_s: 5\n# a: b\n# rt_min: 5")


def test_comments_of_several_lines_are_joined() -> None:
    assert read("# comment: a\n# comment: b").spectrum.measurement.comment == "a\nb"


def test_unknown_labels_and_free_comments_are_kept_verbatim() -> None:
    raw = read("# Vial No.: 3\n# Vial No.: 4\n## hello world").spectrum.raw_fields
    assert dict(raw) == {"Vial No.": "3", "Vial No. (line 2)": "4", "comment in line 3": "hello world"}


def test_an_absurd_amount_of_labels_is_refused() -> None:
    with pytest.raises(InputFileError, match="more than 1000000 characters"):
        read("# a: " + "x" * 1_000_001)
