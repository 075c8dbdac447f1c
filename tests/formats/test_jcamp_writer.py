"""Writing of JCAMP-DX: what is written reads back equal, by our reader and by another."""

from __future__ import annotations

from dataclasses import fields, replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st

from speclib.errors import InvalidValueError
from speclib.formats.jcamp_writer import WritableSpectrum, assignment_text, value_text, write_jcamp
from speclib.formats.reading import read_spectra_from_bytes
from speclib.model.spectrum import (
    MAX_INTENSITY,
    MAX_MZ,
    ClaimedAssignment,
    MassAccuracy,
    Measurement,
    PhaseChemistry,
    SourceSpectrum,
    Spectrum,
)

ASSIGNED = WritableSpectrum(
    Spectrum.of([43, 58], [999, 250.5], measurement=Measurement(ionisation="EI", electron_energy_ev=70.0)),
    title="propan-2-one",
    names=("acetone", "propan-2-one"),
    formula="C3H6O",
    cas="67-64-1",
    smiles="CC(C)=O",
    inchikey="CSCPPACGZOOCGX-UHFFFAOYSA-N",
    assignments=(ClaimedAssignment(43.0, 999.0, "f{C2H3O}"), ClaimedAssignment(58.0, None, "f{C3H6O}")),
)


def read_back(text: str) -> tuple[SourceSpectrum, ...]:
    return read_spectra_from_bytes("out.jdx", text.encode("ascii")).spectra


def test_a_spectrum_with_assignments_is_a_link_of_two_blocks() -> None:
    text = write_jcamp([ASSIGNED])
    assert text.startswith("##TITLE= propan-2-one\n##JCAMP-DX= 5.00\n##DATA TYPE= LINK\n##BLOCKS= 2\n")
    assert "\n(43.0, 999.0, <f{C2H3O}>)\n(58.0, , <f{C3H6O}>)\n##END=\n##END=\n" in text
    found = read_back(text)[0]
    assert WritableSpectrum.of(found).assignments == ASSIGNED.assignments
    assert found.notes == ()


def test_several_spectra_stand_in_a_row() -> None:
    plain = WritableSpectrum(Spectrum.of([43], [1]), title="b")
    found = read_back(write_jcamp([ASSIGNED, plain, ASSIGNED]))
    assert [(s.index, s.title, len(s.assignments)) for s in found] == [
        (1, "propan-2-one", 2), (2, "b", 0), (3, "propan-2-one", 2),
    ]  # fmt: skip


def test_what_is_not_known_is_not_filled_in() -> None:
    found = read_back(write_jcamp([WritableSpectrum(Spectrum.of([43], [1]))]))[0]
    assert found.spectrum.measurement.known() == {}
    assert (found.title, found.names, found.formula, found.cas, found.smiles, found.inchikey) == (None, (), *[None] * 4)
    assert found.spectrum.raw_fields["OWNER"] == "unknown"


def test_owner_and_units_of_the_source_stay_with_the_data() -> None:
    spectrum = replace(Spectrum.of([43], [1]), raw_fields={"OWNER": "a lab\nall rights reserved", "YUNITS": "COUNTS"})
    text = write_jcamp([WritableSpectrum(spectrum)])
    assert "##OWNER= a lab all rights reserved\n" in text
    assert "##YUNITS= COUNTS\n" in text


@pytest.mark.parametrize(
    ("text", "written"),
    [
        ("\u03b1-pinene", "alpha-pinene"),
        ("\u0394\u2079-ene", "Delta9-ene"),
        ("\u03bb", "lambda"),
        ("230 \u00b0C \u00b1 1", "230 deg C +/- 1"),
        ("M\u00fcller", "Muller"),
        ("ends ##TITLE= x $$ no comment", "ends #TITLE= x $ no comment"),
        ("$ $$$", "$ $"),
        ("two\r\nlines\tand\x00more", "two lines andmore"),
        ("\u4e2d", "\\u4e2d"),
        ("purity > 99 %", "purity > 99 %"),
    ],
)
def test_values_are_one_line_of_ascii_that_is_neither_label_nor_comment(text: str, written: str) -> None:
    assert value_text(text) == written
    assert read_back(write_jcamp([replace(ASSIGNED, title=text)]))[0].title == written


def test_long_values_are_folded_and_read_back_whole() -> None:
    smiles = "C" + "=CC" * 100
    name = "1-" + "methyl-" * 40 + "ane and a second word " * 10
    long_text = ClaimedAssignment(43.0, 1.5, "f{C2H3O}, " + "made by alpha cleavage = CO side; " * 9)
    written = replace(ASSIGNED, smiles=smiles, names=(name.strip(), "b"), assignments=(long_text,))
    text = write_jcamp([written])
    assert max(map(len, text.splitlines())) <= 80
    found = read_back(text)[0]
    assert (found.smiles, found.names) == (smiles, (name.strip(), "b"))
    assert found.assignments == (replace(long_text, text=long_text.text.strip()),)


@pytest.mark.parametrize("mz", [0.0, -1.0, float("nan"), MAX_MZ * 2])
def test_an_assignment_of_an_impossible_mz_is_not_written(mz: float) -> None:
    with pytest.raises(InvalidValueError, match="cannot be written"):
        write_jcamp([replace(ASSIGNED, assignments=(ClaimedAssignment(mz, 1.0, "x"),))])


def test_no_spectrum_and_no_text_are_refused() -> None:
    with pytest.raises(InvalidValueError, match="no spectrum"):
        write_jcamp([])
    with pytest.raises(InvalidValueError, match="cannot be written"):
        write_jcamp([replace(ASSIGNED, assignments=(ClaimedAssignment(43.0, 1.0, "\n"),))])


def test_an_independent_reader_reads_plain_and_linked_files(tmp_path: Path) -> None:
    jcamp = pytest.importorskip("jcamp")
    (tmp_path / "plain.jdx").write_text(write_jcamp([replace(ASSIGNED, assignments=())]), encoding="ascii")
    (tmp_path / "linked.jdx").write_text(write_jcamp([ASSIGNED]), encoding="ascii")
    plain = jcamp.readfile(str(tmp_path / "plain.jdx"))
    linked = jcamp.readfile(str(tmp_path / "linked.jdx"))["children"][0]
    for theirs in (plain, linked):
        assert theirs["x"].tolist() == [43.0, 58.0]
        assert theirs["y"].tolist() == [999.0, 250.5]
        assert theirs["npoints"] == 2
        assert theirs["title"] == "propan-2-one"
        assert theirs["cas registry no"] == "67-64-1"


# One line of sanitised text, as `value_text` leaves it.
TEXT = st.text(max_size=200).map(value_text).filter(bool)
NUMBER = st.floats(0, 1e300)
SPECIAL = {
    "ionisation": st.sampled_from(["EI", "CI", "EI-", "CI-"]),
    "phase": st.sampled_from([str(phase) for phase in PhaseChemistry]),
    "scans_averaged": st.integers(1, 10**9 - 1),
    "source_temperature_c": st.floats(-273.15, 1e6),
    "mz_from": st.floats(0, 100),
    "mz_to": st.floats(100, 1e6, exclude_min=True),
}
NUMBERS = (
    "threshold",
    "electron_energy_ev",
    "scan_rate_hz",
    "amount_on_column_ng",
    "retention_time_s",
    "retention_index",
)
MEASUREMENTS = st.fixed_dictionaries(
    {},
    optional={
        field.name: SPECIAL.get(field.name, NUMBER if field.name in NUMBERS else TEXT) for field in fields(Measurement)
    },
)
PEAKS = st.dictionaries(
    st.floats(0, MAX_MZ, exclude_min=True), st.floats(0, MAX_INTENSITY), min_size=1, max_size=30
).filter(lambda peaks: max(peaks.values()) > 0)
CLAIMS = st.builds(
    ClaimedAssignment,
    st.floats(0, MAX_MZ, exclude_min=True),
    st.none() | st.floats(0, MAX_INTENSITY),
    st.text(max_size=200).map(assignment_text).filter(bool),
)


def as_spectrum(peaks: dict[float, float], accuracy: MassAccuracy, measured: dict[str, Any]) -> Spectrum:
    order = sorted(peaks)
    return Spectrum.of(order, [peaks[mz] for mz in order], accuracy, Measurement(**measured))


@settings(deadline=None, max_examples=150)
@given(
    PEAKS,
    st.sampled_from(MassAccuracy),
    MEASUREMENTS,
    st.fixed_dictionaries(
        {}, optional={"title": TEXT, "formula": TEXT, "smiles": TEXT, "inchikey": TEXT, "cas": st.just("67-64-1")}
    ),
    st.lists(TEXT.map(lambda text: text.rstrip("= ")).filter(bool), max_size=4, unique=True).map(tuple),
    st.lists(CLAIMS, max_size=6).map(tuple),
)
@example({43.0: 1.0}, MassAccuracy.UNIT, {"comment": "a" * 69 + "=b"}, {"title": "x ="}, ("a=", "b"), ())
@example(
    {43.0: 1.0},
    MassAccuracy.UNIT,
    {"comment": "c " * 80 + "c", "sample": "c" + " c" * 80},
    {},
    ("a a " * 60 + "a",),
    (),
)
@example({43.0: 1.0}, MassAccuracy.UNIT, {}, {}, (), (ClaimedAssignment(43.0, None, "c " * 99 + "c"),))
def test_anything_that_can_be_written_reads_back_equal(
    peaks: dict[float, float],
    accuracy: MassAccuracy,
    measured: dict[str, Any],
    claims: dict[str, str],
    names: tuple[str, ...],
    assignments: tuple[ClaimedAssignment, ...],
) -> None:
    spectrum = as_spectrum(peaks, accuracy, measured)
    written = WritableSpectrum(spectrum, names=names, assignments=assignments, **claims)
    text = write_jcamp([written])
    assert text.isascii()
    assert max(map(len, text.splitlines())) <= 80
    found = read_back(text)
    assert len(found) == 1
    again = WritableSpectrum.of(found[0])
    assert again.spectrum.measurement == spectrum.measurement
    assert again.spectrum.content_hash == spectrum.content_hash
    assert again.spectrum.mass_accuracy is accuracy
    expected = replace(written, names=tuple(name.rstrip("= ") for name in names))
    assert replace(again, spectrum=spectrum) == expected
    assert write_jcamp([again]) == text


@settings(deadline=None)
@given(st.text(max_size=300), st.text(max_size=300))
def test_any_text_is_written_without_harm(title: str, claim: str) -> None:
    written = replace(ASSIGNED, title=title, assignments=(ClaimedAssignment(43.0, 1.0, "x" + claim),))
    found = read_back(write_jcamp([written]))[0]
    assert (found.title or "") == value_text(title)
    assert found.assignments[0].text == assignment_text("x" + claim)
    assert value_text(value_text(title)) == value_text(title)


def test_numbers_of_numpy_are_written_as_numbers() -> None:
    measured: Any = Measurement(retention_time_s=np.float64(2.5), retention_index=1012)
    text = write_jcamp([WritableSpectrum(Spectrum.of([43], [1], measurement=measured))])
    assert "##.RETENTION TIME= 2.5\n" in text
    assert "##$RETENTION INDEX= 1012\n" in text
